"""The path of a redesign's evidence: Z at each look beside the boundary that makes it clear."""

from __future__ import annotations

import datetime as dt
from typing import Any

from fleet.formats import long_day

Document = dict[str, Any]
Figure = dict[str, Any]
HIGHEST = 6.0  # early boundaries lie far above any evidence: the drawing ends here,
FARTHEST = 12.0  # or where today's boundary lies, so that one sees what is asked for


def path_figure(document: Document) -> Figure:
    """Looks as a line, the boundary and its mirror dashed; the day of the decision as an open ring."""
    path = document["path"]
    days = [look["on"] for look in path]
    height = max([HIGHEST / 2, *(abs(look["z"] or 0.0) for look in path)])
    now = next((look["boundary"] for look in reversed(path) if look["boundary"] is not None), None)
    asked = 0.0 if now is None or abs(now) > FARTHEST else 1.1 * abs(now)
    top = min(max(height * 1.15, asked, HIGHEST), 4 * HIGHEST)
    data = [
        boundary(days, [look["boundary"] for look in path], top, "clear above"),
        boundary(days, [mirrored(look["boundary"]) for look in path], top, "shorter below"),
        {
            "type": "scatter",
            "mode": "lines+markers",
            "name": "by site",
            "x": days,
            "y": [look["z"] for look in path],
            "line": {"color": "var(--blue)", "width": 2.2},
            "marker": {"size": 5, "color": "var(--blue)"},
            "hovertemplate": "%{x}: Z %{y:.2f}<extra></extra>",
        },
    ]
    decided = document["verdict"]["decided_at"]
    if decided:
        data.append(
            {
                "type": "scatter",
                "mode": "markers",
                "name": f"decided {long_day(dt.date.fromisoformat(decided))}",
                "x": [decided],
                "y": [document["verdict"]["z"]],
                "marker": {"symbol": "circle-open", "size": 14, "color": "var(--ink)", "line": {"width": 2}},
                "hovertemplate": "decided %{x}<extra></extra>",
            }
        )
    layout = {
        "xaxis": {"type": "date", "tickformat": "%-d %b %Y"},
        "yaxis": {"title": "Evidence, Z", "range": [-min(top, max(asked, HIGHEST)), top], "zeroline": True},
        "showlegend": True,
    }
    return {"data": data, "layout": layout}


def mirrored(value: float | None) -> float | None:
    return None if value is None else -value


def boundary(days: list[str], values: list[float | None], top: float, name: str) -> dict[str, Any]:
    kept = [None if value is None or abs(value) > 3 * top else value for value in values]
    return {
        "type": "scatter",
        "mode": "lines",
        "name": name,
        "x": days,
        "y": kept,
        "line": {"color": "var(--ink)", "width": 1.4, "dash": "6px,4px"},
        "hovertemplate": "%{x}: %{y:.2f} needed<extra></extra>",
    }


def path_table(document: Document) -> dict[str, Any]:
    """The looks as rows."""
    columns = [
        {"key": "on", "label": "Look of"},
        {"key": "z", "label": "Z by site", "numeric": True, "digits": 2},
        {"key": "position_z", "label": "Z within positions", "numeric": True, "digits": 2},
        {"key": "boundary", "label": "Needed", "numeric": True, "digits": 2},
        {"key": "information", "label": "Information", "numeric": True, "digits": 1},
    ]
    rows = [
        [dt.date.fromisoformat(look["on"]), look["z"], look["position_z"], look["boundary"], look["information"]]
        for look in document["path"]
    ]
    return {"columns": columns, "rows": rows}
