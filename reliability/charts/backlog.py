"""The bench's backlog as a fan over the coming weeks, in modules and in hours; a change of plan as a dashed line."""

from __future__ import annotations

from typing import Any

Document = dict[str, Any]
Figure = dict[str, Any]
FANS = [("0.95", "fan-95"), ("0.8", "fan-80"), ("0.5", "fan-50")]


def modules_figure(document: Document) -> Figure:
    """Modules at the bench at each week's end, with the target as a thin line."""
    weeks = document["weeks"]
    target = {
        "type": "scatter",
        "mode": "lines",
        "x": [weeks[0], weeks[-1]],
        "y": [document["target"]] * 2,
        "name": "target",
        "line": {"color": "var(--amber)", "width": 1.4, "dash": "2px,3px"},
        "hovertemplate": "target: %{y}<extra></extra>",
    }
    data = [*fans(weeks, document["modules"]), mean_line(weeks, document["modules"], "modules"), target]
    if "changed" in document:
        data.append(changed_line(weeks, document["changed"]["modules"], "modules"))
    return {"data": data, "layout": layout("Modules at the bench")}


def hours_figure(document: Document) -> Figure:
    """Hours of work left in the backlog."""
    weeks = document["weeks"]
    data = [*fans(weeks, document["hours"]), mean_line(weeks, document["hours"], "hours")]
    if "changed" in document:
        data.append(changed_line(weeks, document["changed"]["hours"], "hours"))
    return {"data": data, "layout": layout("Hours of work waiting")}


def layout(title: str) -> Figure:
    return {
        "xaxis": {"type": "date", "tickformat": "%-d %b"},
        "yaxis": {"title": title, "rangemode": "tozero"},
        "showlegend": False,
    }


def fans(weeks: list[str], told: Document) -> list[Figure]:
    """Bands, the widest below."""
    data: list[Figure] = []
    for band, wash in FANS:
        pairs = told["bands"][band]
        shared = {
            "type": "scatter",
            "mode": "lines",
            "x": weeks,
            "hoverinfo": "skip",
            "showlegend": False,
            "line": {"width": 0},
        }
        upper = {"y": [high for _, high in pairs], "fill": "tonexty", "fillcolor": f"var(--{wash})"}
        data += [{**shared, "y": [low for low, _ in pairs]}, {**shared, **upper}]
    return data


def mean_line(weeks: list[str], told: Document, unit: str) -> Figure:
    return {
        "type": "scatter",
        "mode": "lines",
        "x": weeks,
        "y": told["mean"],
        "name": "expected",
        "line": {"color": "var(--blue)", "width": 2.2},
        "hovertemplate": f"%{{x}}: %{{y:.1f}} {unit} expected<extra></extra>",
    }


def changed_line(weeks: list[str], told: Document, unit: str) -> Figure:
    return {
        "type": "scatter",
        "mode": "lines",
        "x": weeks,
        "y": told["mean"],
        "name": "with the change",
        "line": {"color": "var(--ink)", "width": 1.6, "dash": "6px,4px"},
        "hovertemplate": f"%{{x}}: %{{y:.1f}} {unit} with the change<extra></extra>",
    }
