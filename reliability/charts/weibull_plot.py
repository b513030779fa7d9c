"""The Weibull plot: log age against log(-log S), where a Weibull life is a straight line.

The points are the non-parametric curve, each at half its step (Meeker & Escobar, Statistical Methods for Reliability
Data (1998), section 6.4), so that the last failure does not fall off the paper.
"""

from __future__ import annotations

import math
from typing import Any

from fleet.formats import number
from reliability.charts.groups import MOST_BANDS, Document, Figure, Group, drawn_groups, style_of
from reliability.charts.survival import named
from reliability.risk_ages import round_ages

FAILED_TICKS = (0.0001, 0.001, 0.01, 0.02, 0.05, 0.1, 0.2, 0.5, 0.9, 0.999)
TABLE_ROWS = 8
MOST_POINTS = 120
QUANTILES = (("b10", 0.1), ("median", 0.5))


def weibull_figure(document: Document, ranks: dict[str, int]) -> Figure:
    """Points and line of each group, the line with its pointwise band; bars are the intervals of a typical site."""
    data: list[dict[str, Any]] = []
    groups = drawn_groups(document)
    heights: list[float] = []
    ages: list[float] = []
    for group in groups:
        style, name = style_of(document, group, ranks), named(group)
        xs, ys = plotted_points(group)
        if len(groups) <= MOST_BANDS:
            data += line_band(group, style, name)
        data += line(group, style, name)
        if xs:
            data.append(points(xs, ys, style, name))
        if group.get("independent") and len(groups) <= MOST_BANDS:
            data.append(bars(group, style, name))
        ages += xs + line_ages(group) + bar_ends(group)
        heights += ys
    return {"data": data, "layout": layout(document, groups, ages, heights)}


def stretched(survival: float) -> float:
    """log(-log S)"""
    return round(math.log(-math.log(survival)), 5)


def plotted_points(group: Group) -> tuple[list[float], list[float]]:
    """Age and log(-log S) at half of each step; of very many, as many as the eye tells apart."""
    curve = group["curve"]
    before, xs, ys = 1.0, [], []
    start = survival_at_start(group)
    for age, survival in zip(curve["age"], curve["survival"], strict=True):
        half = start * (before + survival) / 2
        before = survival
        if 0.0 < half < 1.0 and age > 0:
            xs.append(age)
            ys.append(stretched(half))
    return thinned(xs, ys)


def survival_at_start(group: Group) -> float:
    """Where records began late the curve is given survival to an age: the fitted line says how many came so far."""
    start, line_of = group["curve"]["given_survival_to"] or 0, group.get("fitted")
    if not start or not line_of:
        return 1.0
    place = min(range(len(line_of["age"])), key=lambda index: abs(line_of["age"][index] - start))
    return float(line_of["survival"][place])


def thinned(xs: list[float], ys: list[float]) -> tuple[list[float], list[float]]:
    """At most so many points, evenly spread over the height of the paper."""
    if len(xs) <= MOST_POINTS:
        return xs, ys
    least = (max(ys) - min(ys)) / MOST_POINTS
    kept = [0]
    for place in range(1, len(ys)):
        if ys[place] - ys[kept[-1]] >= least:
            kept.append(place)
    return [xs[place] for place in kept], [ys[place] for place in kept]


def points(xs: list[float], ys: list[float], style: Any, name: str) -> dict[str, Any]:
    return {
        "type": "scatter",
        "mode": "markers",
        "name": name,
        "legendgroup": name,
        "x": xs,
        "y": ys,
        "customdata": [round(-math.expm1(-math.exp(y)), 5) for y in ys],
        "marker": {"symbol": style.symbol, "size": 6, "color": style.color, "opacity": 0.75},
        "hovertemplate": "%{customdata:.1%} failed by %{x:,}<extra>" + name + "</extra>",
    }


def line_ages(group: Group) -> list[float]:
    line_of = group.get("fitted")
    return [line_of["age"][0], line_of["age"][-1]] if line_of else []


def line(group: Group, style: Any, name: str) -> list[dict[str, Any]]:
    fitted = group.get("fitted")
    if not fitted:
        return []
    return [
        {
            "type": "scatter",
            "mode": "lines",
            "name": f"{name}, Weibull",
            "legendgroup": name,
            "showlegend": False,
            "x": [round(age, 2) for age in fitted["age"]],
            "y": [stretched(inside(value)) for value in fitted["survival"]],
            "line": {"color": style.color, "width": 1.8, "dash": style.dash},
            "hoverinfo": "skip",
        }
    ]


def line_band(group: Group, style: Any, name: str) -> list[dict[str, Any]]:
    fitted = group.get("fitted")
    if not fitted:
        return []
    shared = {
        "type": "scatter",
        "mode": "lines",
        "x": [round(age, 2) for age in fitted["age"]],
        "hoverinfo": "skip",
        "showlegend": False,
        "line": {"width": 0},
        "legendgroup": name,
    }
    lower = {**shared, "y": [stretched(inside(value)) for value in fitted["upper"]]}
    upper = {**shared, "y": [stretched(inside(value)) for value in fitted["lower"]]}
    return [lower, {**upper, "fill": "tonexty", "fillcolor": style.wash}]


def inside(survival: float) -> float:
    """A share that still has a place on the paper."""
    return min(max(survival, 1e-9), 1 - 1e-9)


def bars(group: Group, style: Any, name: str) -> dict[str, Any]:
    """B10 and median of a typical site as they stand in the table, with their intervals."""
    told = [(group[key], failed) for key, failed in QUANTILES if group[key] and group[key]["estimate"]]
    return {
        "type": "scatter",
        "mode": "markers",
        "name": f"{name}, typical site",
        "legendgroup": name,
        "showlegend": False,
        "x": [round(value["estimate"], 2) for value, _ in told],
        "y": [stretched(1 - failed) for _, failed in told],
        "marker": {"symbol": "line-ns-open", "size": 14, "color": style.color, "line": {"width": 2}},
        "error_x": {
            "type": "data",
            "symmetric": False,
            "array": [round((value["upper"] or value["estimate"]) - value["estimate"], 2) for value, _ in told],
            "arrayminus": [round(value["estimate"] - (value["lower"] or value["estimate"]), 2) for value, _ in told],
            "color": style.color,
            "thickness": 2,
            "width": 6,
        },
        "customdata": [failed for _, failed in told],
        "hovertemplate": "typical site: %{customdata:.0%} failed by %{x:,}<extra>" + name + "</extra>",
    }


def bar_ends(group: Group) -> list[float]:
    """Where the bars end, as far as there is an end; one far off may leave the paper."""
    if not group.get("independent"):
        return []
    seen_to = group["curve"]["last_age"] or 0
    ends = [group[key][end] for key, _ in QUANTILES if group[key] for end in ("lower", "upper")]
    return [end for end in ends if end and end <= 4 * seen_to]


def layout(document: Document, groups: list[Group], ages: list[float], heights: list[float]) -> dict[str, Any]:
    ticks = [share for share in FAILED_TICKS if not heights or reaches(share, heights)]
    yaxis: dict[str, Any] = {
        "title": "Failed, on log(−log S) paper",
        "tickvals": [stretched(1 - share) for share in ticks],
        "ticktext": [percent_text(share) for share in ticks],
        "zeroline": False,
    }
    if heights:
        yaxis["range"] = [min(heights) - 0.4, max(max(heights), stretched(0.5)) + 0.4]
    xaxis: dict[str, Any] = {"type": "log", "title": f"Age, {document['clock']}, on a log scale"}
    if ages:
        xaxis["range"] = [math.log10(min(ages)) - 0.04, math.log10(max(ages)) + 0.04]
        xaxis["tickvals"] = log_ticks(min(ages), max(ages))
        xaxis["ticktext"] = [number(value) for value in xaxis["tickvals"]]
    return {"xaxis": xaxis, "yaxis": yaxis, "showlegend": len(groups) > 1}


def reaches(share: float, heights: list[float]) -> bool:
    return min(heights) - 0.4 <= stretched(1 - share) <= max(max(heights), stretched(0.5)) + 0.4


def percent_text(share: float) -> str:
    return f"{100 * share:g} %"


def log_ticks(lowest: float, highest: float) -> list[float]:
    """Round ages for a log axis: 1, 2, 5 a decade, or only the decades where there are many."""
    first, last = math.floor(math.log10(lowest)), math.ceil(math.log10(highest))
    factors = (1, 2, 5) if last - first <= 3 else (1,)
    values = [factor * 10.0**power for power in range(first, last + 1) for factor in factors]
    return [value for value in values if lowest * 0.9 <= value <= highest * 1.1]


def line_table(document: Document) -> dict[str, Any]:
    """The fitted lines at round ages: a row an age, a column a group, each share failed with its band."""
    groups = [group for group in drawn_groups(document) if group.get("fitted")]
    longest = max((group["fitted"]["age"][-1] for group in groups), default=0)
    columns: list[dict[str, Any]] = [{"key": "age", "label": f"Age, {document['clock']}"}]
    columns += [{"key": named(group), "label": f"{named(group)}, failed by then", "numeric": True} for group in groups]
    rows = [
        [{"text": number(age)}, *(failed_cell(group["fitted"], age) for group in groups)]
        for age in round_ages(longest, TABLE_ROWS)
        if age > 0
    ]
    return {"columns": columns, "rows": rows if groups else []}


def failed_cell(fitted: dict[str, Any], age: float) -> dict[str, Any]:
    """The share failed by an age, read off the line between two of its points; nothing where it is not drawn."""
    ages = fitted["age"]
    if not ages[0] <= age <= ages[-1]:
        return {"text": None}
    after = next(place for place, knot in enumerate(ages) if knot >= age)
    before = max(after - 1, 0)
    width = ages[after] - ages[before]
    share = (age - ages[before]) / width if width else 0.0
    names = {"estimate": "survival", "lower": "upper", "upper": "lower"}
    return {
        "estimate": {
            end: 1 - fitted[name][before] - share * (fitted[name][after] - fitted[name][before])
            for end, name in names.items()
        },
        "unit": "share",
    }
