"""Survival curves with their bands and the numbers at risk, from the document of `reliability.life_answer`."""

from __future__ import annotations

from typing import Any

from fleet.formats import number
from reliability.charts.groups import (
    MOST_BANDS,
    Document,
    Figure,
    Group,
    drawn_groups,
    level_at,
    steps,
    style_of,
)
from reliability.risk_ages import round_ages

TABLE_ROWS = 11


def survival_figure(document: Document, ranks: dict[str, int]) -> Figure:
    """Steps with their log–log bands and the fitted Weibull as a thin line; `ranks` keeps a part's look."""
    data: list[dict[str, Any]] = []
    groups = drawn_groups(document)
    for group in groups:
        style, name = style_of(document, group, ranks), named(group)
        if len(groups) <= MOST_BANDS:
            data += band(group, style, name)
            data += fitted_lines(group, style, name)
        data.append(curve(group, style, name))
    return {
        "data": data,
        "layout": {
            "xaxis": {"title": f"Age, {document['clock']}", "range": [0, longest_age(groups)], "tickformat": ","},
            "yaxis": {"title": "Still working", "range": [0, 1.02], "tickformat": ".0%"},
            "showlegend": len(groups) > 1,
        },
    }


def named(group: Group) -> str:
    return str(group["group"])


def longest_age(groups: list[Group]) -> float:
    """Where the drawing ends: the oldest part seen, or where a line that is carried on reaches the half."""
    ends = [group["curve"]["last_age"] or 1 for group in groups]
    ends += [group["fitted"]["age"][-1] for group in groups if group.get("fitted")]
    return 1.02 * max(ends, default=1)


def curve(group: Group, style: Any, name: str) -> dict[str, Any]:
    ages, heights = steps(group, "survival")
    return {
        "type": "scatter",
        "mode": "lines",
        "name": name,
        "legendgroup": name,
        "x": ages,
        "y": heights["survival"],
        "line": {"shape": "hv", "color": style.color, "dash": style.dash, "width": 2.4},
        "hovertemplate": "%{y:.0%} still work at %{x:,}<extra>" + name + "</extra>",
    }


def band(group: Group, style: Any, name: str) -> list[dict[str, Any]]:
    ages, heights = steps(group, "lower", "upper")
    shared = {
        "type": "scatter",
        "mode": "lines",
        "x": ages,
        "hoverinfo": "skip",
        "showlegend": False,
        "line": {"shape": "hv", "width": 0},
        "legendgroup": name,
    }
    lower = {**shared, "y": heights["lower"]}
    upper = {**shared, "y": heights["upper"], "fill": "tonexty", "fillcolor": style.wash}
    return [lower, upper]


def fitted_lines(group: Group, style: Any, name: str) -> list[dict[str, Any]]:
    """The Weibull through the same lives, dotted where it is carried on beyond the oldest part; none without a fit."""
    line = group.get("fitted")
    if not line:
        return []
    ages, survival, seen_to = line["age"], line["survival"], line["seen_to"]
    seen = sum(age <= seen_to for age in ages)
    shared = {
        "type": "scatter",
        "mode": "lines",
        "name": f"{name}, Weibull",
        "legendgroup": name,
        "showlegend": False,
        "hoverinfo": "skip",
    }
    drawn = {
        **shared,
        "x": rounded(ages[:seen]),
        "y": rounded(survival[:seen], 5),
        "line": {"color": style.color, "width": 1.2},
    }
    if seen == len(ages):
        return [drawn]
    beyond = {
        **shared,
        "x": rounded(ages[max(seen - 1, 0) :]),
        "y": rounded(survival[max(seen - 1, 0) :], 5),
        "line": {"color": style.color, "width": 1.6, "dash": "1px,5px"},
    }
    return [drawn, beyond]


def rounded(values: list[float], places: int = 2) -> list[float]:
    return [round(value, places) for value in values]


def at_risk_table(document: Document) -> dict[str, Any]:
    """Numbers under observation at a few round ages: columns and rows for parts/table.html."""
    counted = document["at_risk"]
    columns: list[dict[str, Any]] = [{"key": "group", "label": f"Under observation at age, {document['clock']}"}]
    columns += [{"key": f"at {age:g}", "label": number(age), "numeric": True} for age in counted["age"]]
    rows = [[named(group), *counted["counts"][group["group"]]] for group in drawn_groups(document)]
    return {"columns": columns, "rows": rows}


def curve_table(document: Document) -> dict[str, Any]:
    """The drawn curves at round ages: a row an age, a column a group, each share with its band."""
    groups = drawn_groups(document)
    longest = max((group["curve"]["last_age"] or 0 for group in groups), default=0)
    columns: list[dict[str, Any]] = [{"key": "age", "label": f"Age, {document['clock']}"}]
    columns += [{"key": named(group), "label": f"{named(group)}, still working", "numeric": True} for group in groups]
    rows = [
        [{"text": number(age)}, *(share_cell(group, "survival", "lower", "upper", age) for group in groups)]
        for age in round_ages(longest, TABLE_ROWS)
        if age > 0
    ]
    return {"columns": columns, "rows": rows}


def share_cell(group: Group, middle: str, lower: str, upper: str, age: float) -> dict[str, Any]:
    """A share with its band in the softer ink, or that nobody was seen so far."""
    found = {"estimate": level_at(group, middle, age), "lower": level_at(group, lower, age)}
    if found["estimate"] is None:
        return {"text": "not seen"}
    return {"estimate": {**found, "upper": level_at(group, upper, age)}, "unit": "share"}


def compared_at(document: Document, age: float) -> list[dict[str, Any]]:
    """What share of each drawn group still works at one age, with its band; groups not seen so far are left out."""
    told = []
    for group in drawn_groups(document):
        levels = {name: level_at(group, name, age) for name in ("survival", "lower", "upper")}
        if levels["survival"] is not None:
            told.append({"group": named(group), **levels})
    return told
