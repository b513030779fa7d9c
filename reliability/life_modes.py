"""What parts fail by: the share failed by each mode, all of them acting, from records to words and tables."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from fleet.formats import FIXED, number, percent, rounded
from reliability.life_panels import Data, PanelQuestion, Stratum, main_stratum, refused
from reliability.life_words import joined
from reliability.risk_ages import round_ages
from reliability.wording import age, in_sentence, parts_of, sure

if TYPE_CHECKING:
    from reliability.stats.competing import CumulativeIncidence
    from reliability.stats.lifetimes import Lifetimes

NO_MODE = "no mode written down"
FEWEST_SITES = 5  # with fewer, leaving one out says nothing about the spread between them
MINIMUM_AT_RISK = 5
MANY_WITHOUT = 0.1
TABLE_AGES = 4
NAMED_IN_SENTENCE = 3


def answer(question: PanelQuestion) -> Data:
    if question.life_set:
        return refused("imported lives carry no failure modes.")
    found = question.lives(also="mode", modes=None)
    if found.lifetimes is None or not found.lifetimes.failures:
        return refused("no part has failed yet under these choices.")
    strata = [each for each in question.strata(found) if each.lifetimes.failures]
    names = mode_names(question)
    return {
        "groups": [_group(stratum, found.also[stratum.chosen], names, question.confidence) for stratum in strata],
        "band": "log–log; wider where leaving out whole sites says so",
        "method": "Aalen–Johansen",
    }


def mode_names(question: PanelQuestion) -> dict[str, str]:
    from reliability.life_question import titles_of_modes

    return {**titles_of_modes(question.component), "": NO_MODE}


def _group(stratum: Stratum, modes: Any, names: dict[str, str], confidence: float) -> Data:
    """Curves at each failure age, and at a few round ages the shares with the band that allows for sites."""
    import numpy as np

    from reliability.stats.competing import cumulative_incidence
    from reliability.stats.errors import UndefinedEstimate

    lifetimes, found_later = when_found(stratum.lifetimes)
    try:
        curve = cumulative_incidence(lifetimes, modes, confidence, minimum_at_risk=MINIMUM_AT_RISK)
    except UndefinedEstimate:
        curve = cumulative_incidence(lifetimes, modes, confidence)
    ages = [each for each in round_ages(curve.last_age, TABLE_AGES + 1) if each > curve.given_survival_to]
    errors = _errors(lifetimes, modes, curve, ages)
    rows = []
    for place, mode in enumerate(curve.modes):
        shares = curve.incidence_at(mode, ages) if ages else np.empty(0)
        limits = _limits(shares, errors[place], len(lifetimes.site_labels), confidence)
        rows.append(
            {
                "mode": mode,
                "name": names.get(mode, mode),
                "failures": round(float(curve.failures[place].sum())),
                "incidence": shares_of(curve.incidence[place]),
                "lower": shares_of(curve.lower[place]),
                "upper": shares_of(curve.upper[place]),
                "at": [
                    {"age": when, "estimate": float(share), "lower": low, "upper": high}
                    for when, share, (low, high) in zip(ages, shares, limits, strict=True)
                ],
            }
        )
    rows.sort(key=lambda row: -row["failures"])
    return {
        "group": stratum.label,
        "lives": round(lifetimes.count),
        "failures": round(lifetimes.failures),
        "running": stratum.running,
        "found_later": found_later,
        "given_survival_to": curve.given_survival_to,
        "last_age": curve.last_age,
        "ages": curve.times.tolist(),
        "survival": shares_of(curve.survival),
        "modes": rows,
    }


def shares_of(values: Any) -> list[float]:
    """To a millionth, which is finer than any band."""
    return [round(value, 6) for value in values.tolist()]


def when_found(lifetimes: Lifetimes) -> tuple[Lifetimes, int]:
    """The same lives with failures found at a later look at the age at which they were found, and how many they are."""
    from reliability.stats.lifetimes import Lifetimes as Rows

    if not lifetimes.has_intervals:
        return lifetimes, 0
    exact = Rows(
        lifetimes.durations,
        lifetimes.observed,
        entries=lifetimes.entries,
        weights=lifetimes.weights,
        sites=lifetimes.sites,
        groups=lifetimes.groups,
    )
    return exact, round(float(lifetimes.weights[lifetimes.is_interval].sum()))


def _errors(lifetimes: Lifetimes, modes: Any, curve: CumulativeIncidence, ages: list[float]) -> Any:
    """Standard errors at the ages, shape (modes, ages): of independent lives, or larger by leaving out one site at a
    time (jackknife; Efron, The Jackknife, the Bootstrap and Other Resampling Plans (1982), chapter 3).
    """
    import numpy as np

    place = np.searchsorted(curve.times, ages, side="right")
    alone = np.concatenate([np.zeros((len(curve.modes), 1)), curve.standard_error], axis=1)[:, place]
    sites = len(lifetimes.site_labels)
    if sites < FEWEST_SITES or not ages:
        return alone
    without = np.array([_without(lifetimes, modes, curve, ages, site) for site in range(sites)])
    spread = (sites - 1.0) / sites * ((without - without.mean(axis=0)) ** 2).sum(axis=0)
    return np.maximum(alone, np.sqrt(spread))


def _without(lifetimes: Lifetimes, modes: Any, curve: CumulativeIncidence, ages: list[float], site: int) -> Any:
    """The shares at the ages when one site is left out, shape (modes, ages)."""
    import numpy as np

    from reliability.stats.competing import cumulative_incidence

    kept = lifetimes.site_codes != site
    shares = np.zeros((len(curve.modes), len(ages)))
    fewer = lifetimes.subset(kept)
    if not fewer.failures:
        return shares
    again = cumulative_incidence(fewer, modes[kept], given_survival_to=curve.given_survival_to)
    place = np.searchsorted(again.times, ages, side="right")
    for row, mode in enumerate(curve.modes):
        if mode in again.modes:
            shares[row] = np.append(0.0, again.incidence[again.row_of(mode)])[place]
    return shares


def _limits(shares: Any, errors: Any, sites: int, confidence: float) -> list[tuple[float, float]]:
    """F to the power exp(± z se / (F |log F|)); Student's t in place of z where sites were left out."""
    import numpy as np
    from scipy import special

    level = 0.5 + 0.5 * confidence
    z = float(special.stdtrit(sites - 1.0, level) if sites >= FEWEST_SITES else special.ndtri(level))
    limits = []
    for share, error in zip(np.asarray(shares).tolist(), np.asarray(errors).tolist(), strict=True):
        if not 0.0 < share < 1.0:
            limits.append((share, share))
            continue
        stretch = np.exp(min(z * error / (share * -np.log(share)), 700.0))
        limits.append((float(share**stretch), float(share ** (1.0 / stretch))))
    return limits


def sentence(data: Data) -> str:
    """Of the main design, the share failed by each mode at one age, with its interval."""
    main = main_stratum(data["groups"])
    assert main is not None
    at = telling_place(main)
    who = parts_of(data, main["group"])
    if at is None:
        named = joined([f"{number(row['failures'])} {by_mode(row)}" for row in main["modes"][:NAMED_IN_SENTENCE]])
        return f"Of {who} {named} have failed."
    told = []
    for row in main["modes"][:NAMED_IN_SENTENCE]:
        share = row["at"][at]
        told.append(f"{percent(share['estimate'])} {by_mode(row)} ({between(share)})")
    when = age(main["modes"][0]["at"][at]["age"], data["clock"])
    return f"Of {who}, these have failed within {when}: {joined(told)}; {sure(data['confidence'])} of each range."


def between(share: Data) -> str:
    """“40 to 61 %”"""
    sign = f"{FIXED}%"
    return f"{percent(share['lower']).removesuffix(sign)} to {percent(share['upper'])}"


def by_mode(row: Data) -> str:
    return f"by {in_sentence(row['name'])}" if row["mode"] else f"with {NO_MODE}"


def telling_place(group: Data) -> int | None:
    """Which of the round ages the sentence speaks of: the first by which half have failed, else the last."""
    at = group["modes"][0]["at"] if group["modes"] else []
    totals = [sum(row["at"][place]["estimate"] for row in group["modes"]) for place in range(len(at))]
    if not totals:
        return None
    return next((place for place, total in enumerate(totals) if total >= 0.5), len(totals) - 1)


def page(data: Data, *, address: Any = None, ranks: dict[str, int] | None = None) -> Data:
    """Chart of the main design, a table for each."""
    from reliability.charts.modes import incidence_figure

    main = main_stratum(data["groups"])
    assert main is not None
    return {
        "chart": {
            "figure": incidence_figure(data, main),
            "key": None,
            "notes": notes(data, main),
        },
        "tables": [_table(data, main, address)],
        "more_tables": [_table(data, group, address) for group in data["groups"] if group is not main],
        "more_title": "The other designs",
        "how": (
            "Shares that really fail by each mode while the others act too: Aalen & Johansen, Scandinavian Journal of "
            "Statistics 5 (1978) 141–150; variance by Dinse & Larson, Biometrika 73 (1986) 379–386. From five sites on "
            "each site is left out in turn and the wider of the two bands is shown, with Student's t."
        ),
    }


def notes(data: Data, main: Data) -> list[str]:
    told = [
        f"{'' if main['group'] == 'all' else main['group'] + ': '}each layer is one mode; together they are the share "
        "that has failed. All modes act, as in the field: what one takes, another can no longer."
    ]
    later = sum(group["found_later"] for group in data["groups"])
    if later:
        told.append(
            f"{number(later)} failures were only found at a later look and count at the age at which they were found."
        )
    without = sum(row["failures"] for group in data["groups"] for row in group["modes"] if not row["mode"])
    failures = sum(group["failures"] for group in data["groups"])
    if without > MANY_WITHOUT * failures:
        told.append(
            f"{number(without)} of {number(failures)} failures have no mode written down; the other layers are too "
            "thin by their share. Ask the crews for the mode when they log."
        )
    if main["given_survival_to"]:
        start = number(rounded(main["given_survival_to"]))
        told.append(f"Records began late: the shares are of parts that reached {start} {data['clock']}.")
    return told


def _table(data: Data, group: Data, address: Any) -> Data:
    at = group["modes"][0]["at"]
    columns: list[Data] = [
        {"key": "mode", "label": "Mode"},
        {"key": "failures", "label": "Failed", "numeric": True},
    ]
    columns += [
        {"key": f"by {share['age']:g}", "label": f"by {age(share['age'], data['clock'])}", "numeric": True}
        for share in at
    ]
    columns.append({"key": "alone", "label": "If only this mode acted"})
    rows = [
        [
            row["name"],
            {"text": row["failures"], "kind": "failed"},
            *({"estimate": share, "unit": "share"} for share in row["at"]),
            {"text": "its life alone", "url": address(row["mode"])} if address and row["mode"] else {"text": None},
        ]
        for row in group["modes"]
    ]
    caption = f"Share failed by each mode, {parts_of(data, group['group'])}"
    return {"columns": columns, "rows": rows, "caption": caption}


FILE_HEAD = ["component", "clock", "group", "mode", "name", "age", "share_failed", "lower", "upper", "survival"]


def lines(data: Data) -> Any:
    """Every step of every curve."""
    for group in data["groups"]:
        for row in group["modes"]:
            steps = zip(group["ages"], row["incidence"], row["lower"], row["upper"], group["survival"], strict=True)
            for step in steps:
                yield [data["component"], data["clock"], group["group"], row["mode"], row["name"], *step]
