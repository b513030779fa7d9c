"""The weekly forecast as a fan of 50, 80 and 95 bands, from the document of `reliability.forecasts`."""

from __future__ import annotations

import datetime as dt
from typing import Any

Document = dict[str, Any]
Figure = dict[str, Any]
FANS = [("0.95", "fan-95"), ("0.8", "fan-80"), ("0.5", "fan-50")]


def weekly_figure(document: Document, base: Document | None = None) -> Figure:
    """Bands by week, widest below, the mean as a line; weeks are stairs, not slopes. The base case is a dashed line."""
    weeks = document["weeks"]
    starts = [week["from"] for week in weeks]
    if not weeks:
        return {"data": [], "layout": {}}
    end = dt.date.fromisoformat(document["from"]) + dt.timedelta(days=document["days"])
    days = [*starts, end.isoformat()]
    data: list[dict[str, Any]] = []
    for band, wash in FANS:
        if not all(band in week["bands"] for week in weeks):
            continue
        lower = [week["bands"][band][0] for week in weeks]
        upper = [week["bands"][band][1] for week in weeks]
        data += fan(days, lower, upper, wash)
    mean = [week["mean"] for week in weeks]
    data.append(
        {
            "type": "scatter",
            "mode": "lines",
            "x": days,
            "y": [*mean, mean[-1]],
            "name": "expected",
            "line": {"shape": "hv", "color": "var(--blue)", "width": 2.2},
            "hovertemplate": "week from %{x}: %{y:.1f} expected<extra></extra>",
        }
    )
    if base is not None:
        data.append(base_line(days, [week["mean"] for week in base["weeks"]]))
    layout = {
        "xaxis": {"type": "date", "tickformat": "%-d %b"},
        "yaxis": {"title": "Failures a week", "rangemode": "tozero"},
        "showlegend": False,
    }
    return {"data": data, "layout": layout}


def base_line(days: list[str], mean: list[float]) -> dict[str, Any]:
    return {
        "type": "scatter",
        "mode": "lines",
        "x": days,
        "y": [*mean, mean[-1]],
        "name": "base case",
        "line": {"shape": "hv", "color": "var(--ink)", "width": 1.6, "dash": "6px,4px"},
        "hovertemplate": "week from %{x}: %{y:.1f} expected without<extra></extra>",
    }


def happened_marks(weeks: list[Document], counts: list[int]) -> dict[str, Any]:
    """What happened in the weeks that have passed, at the middle of each."""
    half = dt.timedelta(days=3, hours=12)
    middles = [(dt.datetime.fromisoformat(week["from"]) + half).isoformat() for week in weeks[: len(counts)]]
    return {
        "type": "scatter",
        "mode": "markers",
        "x": middles,
        "y": counts,
        "name": "failed",
        "marker": {"symbol": "x-thin", "size": 9, "line": {"color": "var(--red)", "width": 2.4}},
        "hovertemplate": "%{y} failed<extra></extra>",
    }


def fan(days: list[str], lower: list[float], upper: list[float], wash: str) -> list[dict[str, Any]]:
    shared = {
        "type": "scatter",
        "mode": "lines",
        "x": days,
        "hoverinfo": "skip",
        "showlegend": False,
        "line": {"shape": "hv", "width": 0},
    }
    top = {**shared, "y": [*upper, upper[-1]], "fill": "tonexty", "fillcolor": f"var(--{wash})"}
    return [{**shared, "y": [*lower, lower[-1]]}, top]


def weekly_table(document: Document, base: Document | None = None) -> dict[str, Any]:
    """The drawn figures as columns and rows for parts/table.html."""
    columns: list[dict[str, Any]] = [
        {"key": "from", "label": "Week from"},
        {"key": "mean", "label": "Expected", "numeric": True, "digits": 1},
        *({"key": band, "label": f"{100 * float(band):.0f} in 100", "numeric": True} for band, _ in FANS[::-1]),
    ]
    rows: list[list[Any]] = [
        [
            dt.date.fromisoformat(week["from"]),
            week["mean"],
            *("–".join(str(end) for end in week["bands"].get(band, [])) for band, _ in FANS[::-1]),
        ]
        for week in document["weeks"]
    ]
    if base is not None:
        columns.append({"key": "base", "label": "Base case", "numeric": True, "digits": 1})
        for row, week in zip(rows, base["weeks"], strict=True):
            row.append(week["mean"])
    return {"columns": columns, "rows": rows}
