"""Sites and lots that stand out: each judged against how much its like differ, with the rate of false namings said."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from fleet.formats import number, percent
from reliability.life_panels import FEWEST_FAILURES, Data, PanelQuestion, Stratum, refused
from reliability.life_words import joined
from reliability.wording import parts_of, sure

if TYPE_CHECKING:
    from reliability.stats.lifetimes import Lifetimes

FACTOR = 1.25  # as fast as a typical one, beyond which one stands out
ALLOWED = 0.1  # expected share of false namings
NAMED = 4
MOST_JUDGED = 200  # lots; more of them take minutes
EVEN = 0.5
ROWS_IN_SIGHT = 12
KINDS = {"sites": "site", "lots": "lot"}


def answer(question: PanelQuestion) -> Data:
    found = question.found
    if found.lifetimes is None or found.lifetimes.failures < FEWEST_FAILURES:
        return refused(f"fewer than {FEWEST_FAILURES} parts have failed under these choices.")
    families = [_family("sites", stratum, stratum.lifetimes, None, question.confidence) for stratum in _fit(question)]
    if not question.life_set:
        with_lots = question.lives(also="lot")
        for stratum in _fit(question, with_lots):
            lots = with_lots.also[stratum.chosen]
            named, left = most_seen(lots, stratum.lifetimes.weights)
            if named.any():
                lifetimes = at_middles(stratum.lifetimes.subset(named))
                family = _family("lots", stratum, lifetimes, lots[named], question.confidence)
                families.append({**family, "not_judged": left})
    return {"factor": FACTOR, "allowed": ALLOWED, "families": families}


def _fit(question: PanelQuestion, found: Any = None) -> list[Stratum]:
    return [each for each in question.strata(found) if each.lifetimes.failures >= FEWEST_FAILURES]


def most_seen(lots: Any, weights: Any) -> tuple[Any, int]:
    """Which rows are of the lots with most lives that are judged, and how many lots are not."""
    import numpy as np

    labels, place = np.unique(lots, return_inverse=True)
    lives = np.bincount(place, weights=weights)
    lives[labels == ""] = 0.0
    order = np.argsort(-lives, kind="stable")[:MOST_JUDGED]
    judged = np.zeros(labels.size, dtype=bool)
    judged[order] = lives[order] > 0.0
    return judged[place], int((lives > 0.0).sum() - judged.sum())


def at_middles(lifetimes: Lifetimes) -> Lifetimes:
    """Failures found at a later look in the middle between the looks: many lots with intervals would take too long."""
    import numpy as np

    from reliability.stats.lifetimes import Lifetimes as Rows

    if not lifetimes.has_intervals:
        return lifetimes
    middles = 0.5 * (lifetimes.durations + np.where(lifetimes.is_interval, lifetimes.last_good, lifetimes.durations))
    return Rows(
        middles,
        lifetimes.observed,
        entries=lifetimes.entries,
        weights=lifetimes.weights,
        sites=lifetimes.sites,
    )


def _family(kind: str, stratum: Stratum, lifetimes: Lifetimes, labels: Any, confidence: float) -> Data:
    """All sites, or all lots, of one design."""
    from reliability.stats.errors import StatisticsError
    from reliability.stats.standouts import stand_outs

    found_later = round(float(stratum.lifetimes.weights[stratum.lifetimes.is_interval].sum()))
    told: Data = {
        "kind": kind,
        "group": stratum.label,
        "lives": round(lifetimes.count),
        "running": stratum.running,
        "rows": [],
        "found_later": found_later,
        "count": len(set(labels.tolist())) if labels is not None else len(lifetimes.site_labels),
    }
    if told["count"] < 2:
        return {**told, "refused": f"all lives are of one {KINDS[kind]}, with nothing to compare it with"}
    if lifetimes.failures < FEWEST_FAILURES:
        return {**told, "refused": f"fewer than {FEWEST_FAILURES} of them have failed"}
    try:
        found = stand_outs(lifetimes, labels, factor=FACTOR, false_discovery_rate=ALLOWED, confidence_level=confidence)
    except StatisticsError as error:
        return {**told, "refused": str(error)}
    rows = [
        {
            "label": str(row.label),
            "lives": round(row.lives),
            "failures": round(row.failures),
            "expected": row.expected,
            "multiplier": {"estimate": row.multiplier, "lower": row.lower, "upper": row.upper},
            "chance_worse": row.chance_worse,
            "chance_better": row.chance_better,
            "stands_out": row.chosen,
        }
        for row in found.rows
    ]
    return {**told, "rows": rows, "spread": found.spread, "false_discovery_rate": found.false_discovery_rate}


def as_seen(data: Data, mine: set[str]) -> Data:
    """Without the names of other sites; lots stand at many sites and carry none."""
    if data.get("refused"):
        return data
    families = [
        family
        if family["kind"] == "lots"
        else {**family, "rows": [row for row in family["rows"] if row["label"] in mine], "only_own": True}
        for family in data["families"]
    ]
    return {**data, "families": families}


def sentence(data: Data) -> str:
    """What stands out, by name, with how sure that is; the designs in their order."""
    told = [_kind_words(data, kind) for kind in KINDS]
    if not any(told):
        reasons = {family["refused"] for family in data["families"] if family.get("refused")}
        return (
            f"We cannot tell, because {joined(sorted(reasons))}." if reasons else "We cannot tell: nothing to compare."
        )
    rates = [family["false_discovery_rate"] for family in data["families"] if named(family)]
    if rates:
        false = percent(max(rates))
        at_most = "" if false.startswith("under") else " or fewer"
        told.append(
            f"{sure(data['confidence'])[:1].upper()}{sure(data['confidence'])[1:]} of each range; of such "
            f"namings {false}{at_most} are expected to be false."
        )
    return " ".join(each for each in told if each)


def _kind_words(data: Data, kind: str) -> str:
    """Sites, or lots, of all designs in one sentence; nothing where they could not be compared."""
    families = [family for family in data["families"] if family["kind"] == kind and not family.get("refused")]
    if not families:
        return ""
    found = [family for family in families if named(family)]
    times = number(data["factor"], 2)
    if not found:
        own = "Among yours no site" if any(family.get("only_own") for family in families) else f"No {KINDS[kind]}"
        return f"{own} stands out: of none can it be said that its parts fail over {times} times as fast as is typical."
    told = [_family_words(family, several=len(families) > 1) for family in found]
    return f"{kind.capitalize()} whose parts fail clearly faster than a typical one's: {'; '.join(told)}."


def named(family: Data) -> list[Data]:
    return [row for row in family["rows"] if row["stands_out"]]


def _family_words(family: Data, *, several: bool) -> str:
    rows = named(family)
    of = f"of {family['group']}: " if several and family["group"] != "all" else ""
    more = f" and {number(len(rows) - NAMED)} more" if len(rows) > NAMED else ""
    return f"{of}{joined([_row_words(row) for row in rows[:NAMED]])}{more}"


def _row_words(row: Data) -> str:
    times = row["multiplier"]
    between = f"{number(times['lower'], 1)} to {number(times['upper'], 1)}"
    return f"{row['label']} {number(times['estimate'], 1)} times as fast ({between})"


def page(data: Data, *, address: Any = None, ranks: dict[str, int] | None = None) -> Data:
    from reliability.charts.stand_outs import stand_outs_figure

    families = [family for family in data["families"] if family["rows"]]
    ranked = sorted(families, key=lambda family: (-len(named(family)), -family["running"], -family["lives"]))
    tables = [_table(data, family) for family in ranked]
    return {
        "chart": _chart(data, ranked[0], stand_outs_figure) if ranked else None,
        "tables": tables[:1],
        "more_tables": tables[1:],
        "more_title": "The other designs, sites and lots",
        "notes": [
            f"{KINDS[family['kind']].capitalize()}s of {parts_of(data, family['group'])}: we cannot tell, because "
            f"{family['refused']}."
            for family in data["families"]
            if family.get("refused")
        ],
        "how": (
            "Each site's (lot's) hazard is a multiple of a typical one's; the multiples differ by a gamma spread with "
            "mean 1 whose variance is learned from all of them (prior exponential with mean 1). Judged against that "
            f"spread, not against chance alone: named are the most for which P(multiple over {number(FACTOR, 2)}) "
            f"keeps the expected share of false namings within {percent(ALLOWED)} (Müller, Parmigiani, Robert & "
            "Rousseau, J. Amer. Statist. Assoc. 99 (2004) 990–1001). For lots each life is first put on the scale of a "
            "typical site, so that no lot is blamed for its site; a lot found at one site only cannot be told from it."
        ),
    }


def _chart(data: Data, family: Data, figure: Any) -> Data:
    return {"figure": figure(data, family), "notes": notes(data, family), "size": "tall"}


def notes(data: Data, family: Data) -> list[str]:
    told = [
        f"{KINDS[family['kind']].capitalize()}s of {parts_of(data, family['group'])}: how many times as fast as a "
        f"typical one its parts fail, with {percent(data['confidence'])} intervals. A small one is drawn towards 1: "
        "few lives say little."
    ]
    if family.get("not_judged"):
        told.append(
            f"Judged are the {number(family['count'])} lots with most lives; {number(family['not_judged'])} more have "
            "too few to say much."
        )
    if family["kind"] == "lots" and family["found_later"]:
        told.append(
            f"{number(family['found_later'])} failures were only found at a later look; they count in the middle "
            "between the looks."
        )
    return told


def _table(data: Data, family: Data) -> Data:
    word = KINDS[family["kind"]]
    columns = [
        {"key": "label", "label": word.capitalize()},
        {"key": "times", "label": "Times as fast", "numeric": True},
        {"key": "says", "label": "Stands out"},
        {"key": "failures", "label": "Failed", "numeric": True},
        {"key": "expected", "label": "a typical one would have had", "numeric": True, "digits": 1},
        {"key": "lives", "label": "Lives", "numeric": True},
        {"key": "chance", "label": f"Chance of over {number(data['factor'], 2)} times", "numeric": True},
    ]
    rows = [
        [
            row["label"],
            {"estimate": row["multiplier"], "digits": 2},
            stands_out_cell(row),
            row["failures"],
            row["expected"],
            row["lives"],
            percent(row["chance_worse"]),
        ]
        for row in family["rows"][:ROWS_IN_SIGHT]
    ]
    left = len(family["rows"]) - len(rows)
    caption = f"{word.capitalize()}s of {parts_of(data, family['group'])}, the fastest first"
    return {
        "columns": columns,
        "rows": rows,
        "caption": caption + (f"; {number(left)} more in the file" if left else ""),
    }


def stands_out_cell(row: Data) -> Any:
    if row["stands_out"]:
        return {"text": "yes", "kind": "late"}
    return "not surely" if row["chance_worse"] > EVEN else "no"


FILE_HEAD = [
    *("component", "group", "kind", "label", "lives", "failures", "expected", "times_as_fast", "lower", "upper"),
    *("chance_worse", "chance_better", "stands_out"),
]


def lines(data: Data) -> Any:
    for family in data["families"]:
        for row in family["rows"]:
            yield [
                *(data["component"], family["group"], family["kind"], row["label"]),
                *(row[name] for name in ("lives", "failures", "expected")),
                *(row["multiplier"][end] for end in ("estimate", "lower", "upper")),
                *(row["chance_worse"], row["chance_better"], "yes" if row["stands_out"] else "no"),
            ]
