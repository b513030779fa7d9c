"""The page of a redesign from its document: sentences, charts, tables; no statistics, no records."""

from __future__ import annotations

from typing import Any

from fleet.formats import number, percent, rounded
from reliability import redesign_words as words
from reliability.charts.evidence_path import path_figure, path_table
from reliability.charts.survival import at_risk_table, compared_at, curve_table, survival_figure
from reliability.life_page import age_to_compare, group_table
from reliability.life_words import survival_sentence, with_soft_interval

Document = dict[str, Any]
MOST_LABELS = 14
SIDES = (("before", "old"), ("after", "new"))


def page_of(document: Document, tag: str = "") -> dict[str, Any]:
    """Everything the templates show of one component's evidence; tag: for the charts' ids, of several on one sheet."""
    return {
        "lead": with_soft_interval(words.lead(document)),
        "strength": words.strength(document),
        "ahead": words.ahead(document),
        "meanings": words.MEANINGS,
        # before a new part has gone in anywhere there are no dates to look at
        "curves": curves(document, "same_dates", f"curves-same-dates{tag}") if document["starts"] else None,
        "history": curves(document, "all_history", f"curves-all-history{tag}"),
        "groups": figures(document, "same_dates") if document["starts"] else None,
        "groups_history": figures(document, "all_history"),
        "ratios": ratio_table(document),
        "path": path_chart(document, tag) if document["verdict"]["boundary"] is not None and document["path"] else None,
        "by_mode": mode_table(document),
        "by_mode_short": short_mode_table(document),
        "mixes": mix_tables(document),
        "warnings": words.warnings(document),
        "faults": words.faults_sentence(document),
        "tests": test_table(document),
        "mean": mean_sentence(document),
        "few": few_of(document),
        "candidates": candidate_table(document),
        "rigs": rig_table(document),
        "notes": words.plain_notes([*document["same_dates"]["notes"], *document["all_history"]["notes"]]),
        "starts": sorted(document["starts"].items()),
    }


def ranks_of(document: Document) -> dict[str, int]:
    return {words.listed(document["old"]): 0, words.listed(document["new"]): 1}


def curves(document: Document, which: str, name: str) -> dict[str, Any] | None:
    """Both curves on one axis with bands and numbers at risk."""
    found = document[which]["curves"]
    if found is None or not found["groups"]:
        return None
    at = age_to_compare(found, found["groups"])
    compared = compared_at(found, at) if at is not None else []
    return {
        "id": name,
        "sentence": survival_sentence(found, compared, at, len(found["groups"])),
        "figure": survival_figure(found, ranks_of(document)),
        "caption": "The curves at round ages",
        **curve_table(found),
        "at_risk": at_risk_table(found),
    }


def figures(document: Document, which: str) -> dict[str, Any] | None:
    found = document[which]["curves"]
    if not found or not found["groups"]:
        return None
    table = group_table(found, {}, "")
    return {**table, "columns": [{**column, "sort": False} for column in table["columns"]]}


def ratio_table(document: Document) -> dict[str, Any] | None:
    """Life ratios under each assumption, over the same dates and over all history."""
    columns = [
        {"key": "assumed", "label": "Assumed"},
        {"key": "b10", "label": "B10, times as long", "numeric": True},
        {"key": "median", "label": "Median, times as long", "numeric": True},
        {"key": "shapes", "label": "Shape, old and new", "numeric": True},
    ]
    rows = []
    for which, where in (("same_dates", "same dates"), ("all_history", "all history")):
        for way, found in (document[which]["ratio"] or {}).items():
            if found is None or (which == "all_history" and way != "sites differ"):
                continue
            shapes = " and ".join(number(shape, 2) for shape in found["shapes"])
            name = f"{where}: {words.ASSUMED[way]}" if which == "same_dates" else "all history, sites differ"
            rows.append([name, ratio_cell(found["b10"]), ratio_cell(found["median"]), shapes])
    return {"columns": columns, "rows": rows} if rows else None


def ratio_cell(ratio: dict[str, Any] | None) -> dict[str, Any]:
    if ratio is None or ratio["estimate"] is None:
        return {"text": "we cannot tell"}
    return {"estimate": ratio, "digits": 2}


def path_chart(document: Document, tag: str) -> dict[str, Any]:
    return {
        "id": f"path{tag}",
        "sentence": words.strength(document),
        "figure": path_figure(document),
        "caption": "Evidence at each look",
        "size": "short",
        **path_table(document),
    }


def mode_table(document: Document) -> dict[str, Any] | None:
    found = document["by_mode"]
    if not found["rows"]:
        return None
    by = f"by {number(found['age'])} {document['clock']}"
    columns = [
        {"key": "mode", "label": "Failure mode"},
        {"key": "before", "label": f"Old, failed of it {by}", "numeric": True},
        {"key": "after", "label": f"New, failed of it {by}", "numeric": True},
        {"key": "counts", "label": "Failures, old and new", "numeric": True},
        {"key": "z", "label": "Z, if only it acted", "numeric": True, "digits": 2},
        {"key": "change", "label": "With the new part"},
    ]
    rows = [
        [
            row["name"],
            share_cell(row["before"]),
            share_cell(row["after"]),
            f"{number(row['before_failures'])} and {number(row['after_failures'])}",
            row["z"],
            row["change"],
        ]
        for row in found["rows"]
    ]
    return {"columns": columns, "rows": rows}


def short_mode_table(document: Document) -> dict[str, Any] | None:
    """The same for people who decide: shares and what changed."""
    found = document["by_mode"]
    if not found["rows"]:
        return None
    columns = [
        {"key": "mode", "label": f"Failed by {number(found['age'])} {document['clock']}"},
        {"key": "before", "label": "Old", "numeric": True},
        {"key": "after", "label": "New", "numeric": True},
        {"key": "change", "label": "With the new part"},
    ]
    rows = [[row["name"], share_cell(row["before"]), share_cell(row["after"]), row["change"]] for row in found["rows"]]
    return {"columns": columns, "rows": rows}


def share_cell(share: dict[str, Any]) -> dict[str, Any]:
    if share["estimate"] is None:
        return {"text": "not seen so long"}
    return {"estimate": share, "unit": "share"}


def mix_tables(document: Document) -> list[dict[str, Any]]:
    """What each side is made of, one small table a thing; lots only counted."""
    tables = []
    for mix in document["comparability"]["mixes"]:
        rows = sorted(mix["rows"], key=lambda row: -(row["before"] + row["after"]))
        if mix["name"] == "lot":
            rows = sorted(mix["rows"], key=lambda row: -row["after"])
        if not rows:
            continue
        columns = [
            {"key": "label", "label": mix["name"].capitalize()},
            {"key": "before", "label": "Old", "numeric": True},
            {"key": "after", "label": "New", "numeric": True},
        ]
        tables.append(
            {
                "title": f"{mix['name'].capitalize()}, shares of {mix['of']}",
                "overlap": None if mix["overlap"] is None or mix["name"] == "lot" else percent(mix["overlap"]),
                "columns": columns,
                "rows": [[row["label"], percent(row["before"]), percent(row["after"])] for row in rows[:MOST_LABELS]],
                "more": max(len(rows) - MOST_LABELS, 0),
            }
        )
    return tables


def test_table(document: Document) -> dict[str, Any] | None:
    if all(test["z"] is None for which in ("same_dates", "all_history") for test in document[which]["tests"]):
        return None
    columns = [
        {"key": "strata", "label": "Log-rank test"},
        {"key": "z", "label": "Z", "numeric": True, "digits": 2},
        {"key": "p", "label": "P, one look", "numeric": True},
        {"key": "excess", "label": "Failures of old parts beyond expected", "numeric": True, "digits": 1},
        {"key": "information", "label": "Information", "numeric": True, "digits": 1},
        {"key": "history", "label": "Z over all history", "numeric": True, "digits": 2},
    ]
    rows = []
    for same, every in zip(document["same_dates"]["tests"], document["all_history"]["tests"], strict=True):
        p = None if same["p"] is None else ("below 0.001" if same["p"] < 0.001 else number(same["p"], 3))
        rows.append([same["strata"], same["z"], p, same.get("excess"), same["information"], every["z"]])
    return {"columns": columns, "rows": rows}


def mean_sentence(document: Document) -> str:
    found = document["same_dates"]["restricted_mean"]
    if found is None or not any(found["difference"].values()):
        return "How much longer they run on average cannot be told yet."
    gain, clock = found["difference"], document["clock"]
    mean, *ends = (rounded(round(gain[end])) for end in ("estimate", "lower", "upper"))
    longer = mean >= 0
    low, high = ends if longer else (-ends[1], -ends[0])
    how = "whole sites left out in turn" if found["interval"] == "sites" else "lives taken as independent"
    amount = f"{number(abs(mean))} {clock} {'longer' if longer else 'shorter'}"
    limits = f"{words.sure(document['confidence'])} it lies between {number(low)} and {number(high)}; {how}"
    upto = f"{number(rounded(found['horizon'], 3))} {clock}"
    return f"Counted up to {upto}, new parts run {amount} on average ({limits})."


def few_of(document: Document) -> dict[str, Any] | None:
    """Bounds over a range of shapes, and the tests that would show the hope."""
    found = document["few"]
    if found is None:
        return None
    bounds = {
        "columns": [
            {"key": "shape", "label": "If the shape is", "numeric": True, "digits": 2},
            {"key": "b10", "label": f"nine in ten last longer than, {document['clock']}", "numeric": True},
        ],
        "rows": [[row["shape"], row["b10_lower"]] for row in found["bounds"]],
    }
    allowed = sorted({plan["allowed"] for plan in found["plans"]})
    plans = {
        "columns": [
            {"key": "age", "label": f"Each part runs, {document['clock']}"},
            *({"key": str(count), "label": f"parts, {count} may fail", "numeric": True} for count in allowed),
        ],
        "rows": [
            [
                {"text": number(round(age))},
                *(plan["parts"] for plan in found["plans"] if plan["age"] == age),
            ]
            for age in sorted({plan["age"] for plan in found["plans"]})
        ],
    }
    return {
        "sentence": words.few_sentence(document),
        "bounds": bounds,
        "plans": plans if found["plans"] else None,
        "test": test_sentence(document, found),
        "test_short": short_test(document, found),
        "confidence": percent(found["confidence"]),
    }


def test_sentence(document: Document, found: Document) -> str:
    """What the test would show, from which life of the old parts and which shape the plan comes."""
    if not found["plans"]:
        return ""
    target, clock = number(rounded(found["target"])), document["clock"]
    groups = (document["all_history"]["curves"] or {"groups": []})["groups"]
    old = groups[0]["b10"] if groups else None
    of_old = ""
    if old:
        of_old = f", {number(document['hope'], 2)} times the {number(rounded(old['estimate']))} {clock} of the old ones"
        if old["lower"] is not None and old["upper"] is not None:
            of_old += f" ({number(rounded(old['lower']))} to {number(rounded(old['upper']))})"
    shape = number(found["plan_shape"], 2)
    return (
        f"To show with {percent(found['confidence'])} confidence that nine in ten last {target} {clock}{of_old}, so "
        f"many parts have to run so long, and no more may fail. The shape is taken to be {shape}. Were it higher, "
        f"tests shorter than {target} {clock} would show too much; were it lower, longer ones. At {target} it does "
        "not matter."
    )


def short_test(document: Document, found: Document) -> str:
    """The plainest of the tests: as long as the life to be shown, without a failure."""
    plain = next((plan for plan in found["plans"] if plan["age"] == found["target"] and not plan["allowed"]), None)
    if plain is None:
        return ""
    return (
        f"{number(plain['parts'])} parts that each run {number(rounded(found['target']))} {document['clock']} without "
        f"a failure would show with {percent(found['confidence'])} confidence that nine in ten last so long."
    )


def candidate_table(document: Document) -> dict[str, Any] | None:
    if not document["candidates"]:
        return None
    columns = [
        {"key": "part", "label": "New part"},
        {"key": "lives", "label": "Lives", "numeric": True},
        {"key": "failures", "label": "Failed", "numeric": True},
        {"key": "sites", "label": "Sites", "numeric": True},
        {"key": "median", "label": "Median, times as long", "numeric": True},
        {"key": "longer", "label": "Chance of longer life", "numeric": True},
        {"key": "z", "label": "Z by site", "numeric": True, "digits": 2},
    ]
    rows = []
    for row in document["candidates"]:
        ratio = ratio_cell((row["ratio"] or {}).get("median"))
        longer = None if row["longer"] is None else words.in_hundred(row["longer"])
        part = {"text": row["part"], "sub": row["why_not"]}
        rows.append([part, row["lives"], row["failures"], row["sites"], ratio, longer, row["z"]])
    return {"columns": columns, "rows": rows}


def rig_table(document: Document) -> dict[str, Any] | None:
    if not document["rigs"]:
        return None
    columns = [
        {"key": "part", "label": "Part"},
        {"key": "rig", "label": "On stands", "numeric": True},
        {"key": "rig_failures", "label": "failed", "numeric": True},
        {"key": "field", "label": "In the field", "numeric": True},
        {"key": "field_failures", "label": "failed", "numeric": True},
        {"key": "factor", "label": "Median, stand over field", "numeric": True},
        {"key": "over_old", "label": "On stands, new over old", "numeric": True},
    ]
    rows = [
        [
            {"text": row["part"], "sub": row["why_not"]},
            row["rig_lives"],
            row["rig_failures"],
            row["field_lives"],
            row["field_failures"],
            ratio_cell(row["factor"]),
            None if row["part"] in document["old"] else ratio_cell(row["over_old"]),
        ]
        for row in document["rigs"]
    ]
    return {"columns": columns, "rows": rows}
