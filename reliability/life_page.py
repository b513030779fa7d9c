"""The Life screen from a life document: sentences, charts, tables and notes; no statistics, no records."""

from __future__ import annotations

from typing import Any

from fleet.formats import number, percent, rounded
from reliability import life_words as words
from reliability.charts.groups import MOST_BANDS, drawn_groups, rank_of
from reliability.charts.survival import at_risk_table, compared_at, curve_table, survival_figure
from reliability.charts.weibull_plot import line_table, weibull_figure
from reliability.risk_ages import round_ages

Document = dict[str, Any]
Group = dict[str, Any]
SENTENCES_IN_SIGHT = 6
NOTES_IN_SIGHT = 6
MOST_FEW_TABLES = 3
SHAPES_SIDE_BY_SIDE = (1.0, 2.0, 3.0, 5.0)
BEYOND = "beyond the oldest part"
COLUMNS = [
    ("group", "Group"),
    ("lives", "Lives"),
    ("failures", "Failed"),
    ("running", "Running"),
    ("b10", "One in ten fails by (B10)"),
    ("median", "Half fail by (median)"),
    ("mean", "Mean life"),
    ("shape", "Shape"),
]


def page_of(document: Document, ranks: dict[str, int], names: dict[str, str], sort: str = "") -> dict[str, Any]:
    """Everything the template shows of a document with at least one group."""
    drawn = drawn_groups(document)
    main = words.main_group(document)
    rest = [group for group in document["groups"] if group is not main]
    notes = notes_of(document)
    return {
        "lead": words.with_soft_interval(main["sentence"]) if main else "",
        "lead_rank": rank_in(document, main, ranks) if main else None,
        "marked": len(document["groups"]) > 1,
        "sentences": [told(document, group, ranks) for group in rest[:SENTENCES_IN_SIGHT]],
        "more_sentences": [told(document, group, ranks) for group in rest[SENTENCES_IN_SIGHT:]],
        "survival": survival_chart(document, drawn, ranks) if drawn else None,
        "at_risk": at_risk_table(document) if drawn else None,
        "groups": group_table(document, names, sort),
        "method_line": words.method_line(document),
        "plot": plot_chart(document, drawn, ranks) if any(group["failures"] for group in drawn) else None,
        "few": few_tables(document),
        "if_not_known": not_known_table(document),
        "engineer": engineer_table(document),
        "left_out_sentence": words.left_out_sentence(document),
        "notes": notes[:NOTES_IN_SIGHT],
        "more_notes": notes[NOTES_IN_SIGHT:],
        "methods": sorted({group["curve"]["method"] for group in drawn}),
        "bands": sorted({group["curve"]["band"] for group in drawn}),
        "site_spread": any(group["independent"] for group in document["groups"]),
    }


def rank_in(document: Document, group: Group, ranks: dict[str, int]) -> int | None:
    """Its look where it is drawn among others; none where there is nothing to tell apart."""
    drawn = drawn_groups(document)
    if len(document["groups"]) < 2 or group not in drawn:
        return None
    return rank_of(document, group, ranks)


def told(document: Document, group: Group, ranks: dict[str, int]) -> dict[str, Any]:
    return {"words": words.with_soft_interval(group["sentence"]), "rank": rank_in(document, group, ranks)}


def survival_chart(document: Document, drawn: list[Group], ranks: dict[str, int]) -> dict[str, Any]:
    at = age_to_compare(document, drawn)
    compared = compared_at(document, at) if at is not None else []
    return {
        "id": "survival",
        "sentence": words.survival_sentence(document, compared, at, len(drawn)),
        "figure": survival_figure(document, ranks),
        "caption": "The curves at round ages; the file holds every step",
        **curve_table(document),
        "notes": [
            words.curves_note(
                document,
                bands=len(drawn) <= MOST_BANDS,
                fits=len(drawn) <= MOST_BANDS and any(group.get("fitted") for group in drawn),
            )
        ],
    }


def age_to_compare(document: Document, drawn: list[Group]) -> float | None:
    """A round age at which all that tell something were still seen: near half of the shortest of them."""
    ends = [group["curve"]["last_age"] or 0 for group in drawn if group["weibull"] or len(drawn) == 1]
    ends = ends or [group["curve"]["last_age"] or 0 for group in drawn]
    longest = max(ends, default=0)
    if not longest:
        return None
    shortest = max(min(ends), longest / 10)
    ages = [age for age in round_ages(shortest) if age > 0]
    return min(ages, key=lambda age: abs(age - shortest / 2), default=None)


def plot_chart(document: Document, drawn: list[Group], ranks: dict[str, int]) -> dict[str, Any]:
    return {
        "id": "weibull-plot",
        "size": "tall",
        "sentence": words.plot_sentence(document, drawn),
        "figure": weibull_figure(document, ranks),
        "caption": "The fitted lines",
        **line_table(document),
        "notes": [words.plot_note(document, drawn, bands=len(drawn) <= MOST_BANDS)],
    }


def group_table(document: Document, names: dict[str, str], sort: str) -> dict[str, Any]:
    """Lives, failures, running, then each estimate with its interval; sorted by the address."""
    several = len(document["groups"]) > 1
    columns = [{"key": key, "label": label, "numeric": key != "group", "sort": several} for key, label in COLUMNS]
    groups = sorted_groups(document["groups"], sort)
    return {"columns": columns, "rows": [row_of(group, names) for group in groups]}


def every_group(document: Document, names: dict[str, str], sort: str) -> dict[str, Any]:
    """The table of all groups where there are more than are drawn; those too small to fit show what was counted."""
    table = group_table(document, names, sort)
    few = sum(group["median"] is None and group["few_failures"] is None for group in document["groups"])
    note = (
        f"{number(few)} groups with fewest lives are not fitted; they show what their curve comes down to."
        if few
        else ""
    )
    return {**table, "note": note, "plain_columns": [{**column, "sort": False} for column in table["columns"]]}


def sorted_groups(groups: list[Group], sort: str) -> list[Group]:
    """In the order asked for, groups without the figure last; else in their own order."""
    key = sort.removeprefix("-")
    if key == "group":
        return groups[::-1] if sort.startswith("-") else groups
    if key not in dict(COLUMNS):
        return groups
    known = [group for group in groups if figure_of(group, key) is not None]
    known.sort(key=lambda group: figure_of(group, key), reverse=sort.startswith("-"))  # type: ignore[arg-type,return-value]
    return known + [group for group in groups if figure_of(group, key) is None]


def figure_of(group: Group, key: str) -> float | None:
    """The plain number a column is sorted by and a file holds."""
    if key in ("lives", "failures", "running"):
        return group[key]
    found = estimate_of(group, key)
    return found["estimate"] if found else None


def estimate_of(group: Group, key: str) -> dict[str, Any] | None:
    found = (group["weibull"] or {}).get(key) if key in ("shape", "scale") else group[key]
    return found if found and found["estimate"] is not None else None


def row_of(group: Group, names: dict[str, str]) -> list[Any]:
    code = group["group"]
    head = {"text": "all together"} if code == "all" else {"text": code, "sub": names.get(code, "")}
    failed = {"text": group["failures"], "kind": "failed" if group["failures"] else ""}
    estimates = (cell_of(group, key) for key in ("b10", "median", "mean", "shape"))
    return [head, group["lives"], failed, group["running"], *estimates]


def cell_of(group: Group, key: str) -> dict[str, Any]:
    """An estimate with its interval; where there is none, what the curve says, or that it cannot be told."""
    found = estimate_of(group, key)
    if found is None:
        return read_off(group, key)
    digits = 1 if key == "shape" else None
    return {"estimate": found, "digits": digits, "sub": remark(group, key, found)}


def remark(group: Group, key: str, found: dict[str, Any]) -> str:
    open_ends = found.get("unbounded") or []
    told = []
    if len(open_ends) == 2:
        told.append("not bounded")
    elif "upper" in open_ends:
        told.append("no upper limit")
    elif "lower" in open_ends:
        told.append("no lower limit")
    last_age = group["curve"]["last_age"]
    if key != "shape" and last_age is not None and found["estimate"] > last_age:
        told.append(BEYOND)
    return ", ".join(told)


def read_off(group: Group, key: str) -> dict[str, Any]:
    """Without a fit: the curve's own B10 and median where it comes down to them."""
    if key not in ("b10", "median"):
        return {"text": "cannot tell yet"}
    found = group["curve"].get(key)
    if not found or not found["reached"]:
        return {"text": "not reached"}
    return {"estimate": found, "sub": "read off the curve"}


def few_tables(document: Document) -> list[dict[str, Any]]:
    """A table a group; where there are many such groups, one table with a row for each."""
    groups = [group for group in document["groups"] if group["few_failures"]]
    if len(groups) <= MOST_FEW_TABLES:
        return [few_failures(document, group) for group in groups]
    confidence, clock = groups[0]["few_failures"]["confidence"], document["clock"]
    columns: list[dict[str, Any]] = [
        {"key": "group", "label": "Group"},
        {"key": "lives", "label": "Lives", "numeric": True},
        {"key": "failures", "label": "Failed", "numeric": True},
        {"key": "oldest", "label": f"Oldest, {clock}", "numeric": True, "digits": 0},
    ]
    columns += [
        {"key": f"shape {shape:g}", "label": f"if shape {number(shape)}", "numeric": True}
        for shape in SHAPES_SIDE_BY_SIDE
    ]
    return [
        {
            "title": "",
            "sentence": words.many_few_sentence(len(groups), confidence),
            "columns": columns,
            "rows": [few_row(group) for group in groups],
            "caption": f"Nine in ten last longer than so many {clock}, {percent(confidence)} sure",
        }
    ]


def few_row(group: Group) -> list[Any]:
    bounds = {bound["shape"]: bound["b10_lower"] for bound in group["few_failures"]["bounds"]}
    shown = (shown_bound(bounds.get(shape)) for shape in SHAPES_SIDE_BY_SIDE)
    return [group["group"], group["lives"], group["failures"], group["curve"]["last_age"], *shown]


def few_failures(document: Document, group: Group) -> dict[str, Any]:
    """The bounds under assumed shapes, as a table with its sentence."""
    few = group["few_failures"]
    clock = document["clock"]
    return {
        "title": "" if group["group"] == "all" else group["group"],
        "sentence": words.few_sentence(document, group),
        "columns": [
            {"key": "wears", "label": "If it"},
            {"key": "shape", "label": "Shape assumed", "numeric": True, "digits": 1},
            {"key": "b10", "label": f"nine in ten last over, {clock}", "numeric": True},
            {"key": "mean", "label": f"mean life over, {clock}", "numeric": True},
            {"key": "test", "label": "parts to run to twice an age", "numeric": True},
        ],
        "rows": [
            [
                words.WEAR.get(bound["shape"], "wears so"),
                bound["shape"],
                *(shown_bound(bound[name]) for name in ("b10_lower", "mean_lower")),
                bound["parts_to_twice"],
            ]
            for bound in few["bounds"]
        ],
        "caption": f"What is {percent(few['confidence'])} sure, for each way of wearing",
    }


def shown_bound(value: float | None) -> dict[str, Any]:
    return {"text": "nothing shown yet" if not value else number(rounded(value))}


def not_known_table(document: Document) -> dict[str, Any] | None:
    """Where many removals have no known reason: the answer with all of them as failures beside the answer without."""
    groups = [group for group in document["groups"] if group.get("if_not_known_failed")]
    if not groups:
        return None
    columns = [
        {"key": "group", "label": "Group"},
        {"key": "median", "label": "Median, all of them in good order", "numeric": True},
        {"key": "other", "label": "Median, all of them failed", "numeric": True},
    ]
    rows = [
        [
            group["group"],
            cell_of(group, "median"),
            cell_of({**group, **group["if_not_known_failed"]}, "median"),
        ]
        for group in groups
    ]
    return {"columns": columns, "rows": rows}


def engineer_table(document: Document) -> dict[str, Any] | None:
    """Scale, likelihood, spread between sites, Wald's interval, and the answer as if lives were independent."""
    fitted = [group for group in document["groups"] if group["weibull"]]
    if not fitted:
        return None
    columns = [
        {"key": "group", "label": "Group"},
        {"key": "scale", "label": f"Scale, {document['clock']}", "numeric": True},
        {"key": "wald", "label": "Shape, Wald", "numeric": True},
        {"key": "spread", "label": "Spread between sites", "numeric": True},
        {"key": "alone_shape", "label": "Shape, lives independent", "numeric": True},
        {"key": "alone_b10", "label": "B10, lives independent", "numeric": True},
        {"key": "alone_median", "label": "Median, lives independent", "numeric": True},
        {"key": "curve", "label": "Median off the curve", "numeric": True},
        {"key": "log_likelihood", "label": "Log-likelihood", "numeric": True, "digits": 2},
        {"key": "aicc", "label": "AICc", "numeric": True, "digits": 1},
    ]
    return {"columns": columns, "rows": [engineer_row(group) for group in fitted]}


def engineer_row(group: Group) -> list[Any]:
    weibull, alone = group["weibull"], group["independent"] or {}
    shape = (alone.get("weibull") or {}).get("shape")
    return [
        group["group"],
        estimate_cell(weibull["scale"]),
        estimate_cell((weibull.get("wald") or {}).get("shape"), 2),
        estimate_cell(weibull.get("site_spread"), 2),
        estimate_cell(shape, 2),
        estimate_cell(alone.get("b10")),
        estimate_cell(alone.get("median")),
        read_off(group, "median"),
        weibull["log_likelihood"],
        weibull["aicc"],
    ]


def estimate_cell(found: dict[str, Any] | None, digits: int | None = None) -> dict[str, Any]:
    if not found or found["estimate"] is None:
        return {"text": None}
    return {"estimate": found, "digits": digits}


def notes_of(document: Document) -> list[str]:
    """The notes of the groups, each with its group; what several groups share is said once."""
    groups: dict[str, list[str]] = {}
    for group in document["groups"]:
        for note in group["notes"]:
            groups.setdefault(note, []).append(str(group["group"]))
    return [note if named == ["all"] else f"{', '.join(named)}: {note}" for note, named in groups.items()]
