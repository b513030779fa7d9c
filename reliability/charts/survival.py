"""Survival curves with their bands and the numbers at risk, from the document of `reliability.life_answer`."""

from __future__ import annotations

from typing import Any

from fleet.formats import number
from fleet.part_styles import part_style

MOST_GROUPS = 8  # beyond that colours repeat and nobody can tell them apart
RISK_COLUMNS = 6

Document = dict[str, Any]
Figure = dict[str, Any]


def survival_figure(document: Document, ranks: dict[str, int]) -> Figure:
    """Kaplan–Meier steps with their log–log bands and the fitted Weibull as a thin line; `ranks` keeps a part's look."""
    data: list[dict[str, Any]] = []
    groups = drawn_groups(document)
    for place, group in enumerate(groups):
        style = part_style(ranks.get(group["group"], place))
        name = group["group"] or "all"
        if len(groups) <= 3:
            data += band(group, style, name)
        data.append(curve(group, style, name))
        fitted = fitted_line(group, style, name)
        if fitted:
            data.append(fitted)
    return {
        "data": data,
        "layout": {
            "xaxis": {"title": f"Age, {document['clock']}", "rangemode": "tozero"},
            "yaxis": {"title": "Still working", "range": [0, 1.02], "tickformat": ".0%"},
            "showlegend": len(groups) > 1,
        },
    }


def drawn_groups(document: Document) -> list[dict[str, Any]]:
    """The groups that have a curve, those with most lives first, at most eight."""
    groups = [group for group in document["groups"] if group["curve"]["age"]]
    return sorted(groups, key=lambda group: -group["lives"])[:MOST_GROUPS]


def curve(group: dict[str, Any], style: Any, name: str) -> dict[str, Any]:
    points = group["curve"]
    return {
        "type": "scatter",
        "mode": "lines",
        "name": name,
        "x": points["age"],
        "y": points["survival"],
        "line": {"shape": "hv", "color": style.color, "dash": style.dash, "width": 2.4},
        "customdata": points["at_risk"],
        "hovertemplate": "%{y:.0%} still work at %{x}; %{customdata} at risk<extra>" + name + "</extra>",
    }


def band(group: dict[str, Any], style: Any, name: str) -> list[dict[str, Any]]:
    points = group["curve"]
    shared = {
        "type": "scatter",
        "mode": "lines",
        "x": points["age"],
        "hoverinfo": "skip",
        "showlegend": False,
        "line": {"shape": "hv", "width": 0},
        "legendgroup": name,
    }
    lower = {**shared, "y": points["lower"]}
    upper = {**shared, "y": points["upper"], "fill": "tonexty", "fillcolor": style.wash}
    return [lower, upper]


def fitted_line(group: dict[str, Any], style: Any, name: str) -> dict[str, Any] | None:
    """The Weibull through the same data; none where it was not fitted."""
    line = group.get("fitted") or {}
    if not line.get("age"):
        return None
    return {
        "type": "scatter",
        "mode": "lines",
        "name": f"{name}, Weibull",
        "x": line["age"],
        "y": line["survival"],
        "line": {"color": style.color, "width": 1, "dash": "dot"},
        "hoverinfo": "skip",
        "showlegend": False,
    }


def at_risk_table(document: Document) -> dict[str, Any]:
    """Numbers at risk at a few round ages: columns and rows for parts/table.html."""
    groups = drawn_groups(document)
    longest = max((group["curve"]["age"][-1] for group in groups), default=0)
    ages = round_ages(longest)
    columns = [{"key": "group", "label": f"At risk at age, {document['clock']}"}]
    columns += [{"key": str(age), "label": number(age), "numeric": True} for age in ages]
    rows = [[group["group"] or "all", *(at_risk(group["curve"], age) for age in ages)] for group in groups]
    return {"columns": columns, "rows": rows}


def round_ages(longest: float) -> list[int]:
    """A handful of round ages from 0 to the longest."""
    if longest <= 0:
        return [0]
    step = longest / (RISK_COLUMNS - 1)
    size = 10 ** (len(str(int(step))) - 1)
    nice = next((factor * size for factor in (1, 2, 2.5, 5, 10) if factor * size >= step), step)
    return [int(nice * place) for place in range(RISK_COLUMNS) if nice * place <= longest]


def at_risk(points: dict[str, Any], age: float) -> int:
    """How many were under observation just before an age."""
    for knot, count in zip(points["age"], points["at_risk"], strict=True):
        if knot >= age:
            return count
    return 0


def curve_table(document: Document) -> dict[str, Any]:
    """The drawn figures as rows: group, age, still working, band, at risk."""
    columns = [
        {"key": "group", "label": "Group"},
        {"key": "age", "label": f"Age, {document['clock']}", "numeric": True},
        {"key": "working", "label": "Still working, %", "numeric": True, "digits": 1},
        {"key": "lower", "label": "from", "numeric": True, "digits": 1},
        {"key": "upper", "label": "to", "numeric": True, "digits": 1},
        {"key": "at_risk", "label": "At risk", "numeric": True},
    ]
    rows = [
        [group["group"] or "all", age, *(percent(end) for end in ends), risk]
        for group in drawn_groups(document)
        for age, *ends, risk in zip(
            *(group["curve"][name] for name in ("age", "survival", "lower", "upper", "at_risk")), strict=True
        )
    ]
    return {"columns": columns, "rows": rows}


def percent(share: float | None) -> float | None:
    return None if share is None else 100 * share
