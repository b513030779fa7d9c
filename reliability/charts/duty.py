"""Median life against duty: the regression's line with its band, and each site's own median."""

from __future__ import annotations

from typing import Any

Figure = dict[str, Any]


def duty_figure(data: dict[str, Any], effect: dict[str, Any]) -> Figure:
    line, points = effect["line"], effect["points"]
    duties = [round(point["duty"], 3) for point in line]
    quiet = {"type": "scatter", "mode": "lines", "x": duties, "hoverinfo": "skip", "showlegend": False}
    traces: list[dict[str, Any]] = []
    if all(point[end] is not None for point in line for end in ("lower", "upper")):
        traces += [
            {**quiet, "y": [point["lower"] for point in line], "line": {"width": 0}},
            {
                **quiet,
                "y": [point["upper"] for point in line],
                "line": {"width": 0},
                "fill": "tonexty",
                "fillcolor": "var(--shade)",
            },
        ]
    traces.append(
        {
            **quiet,
            "y": [point["estimate"] for point in line],
            "line": {"color": "var(--ink)", "width": 2.2},
            "showlegend": False,
        }
    )
    if points:
        traces.append(sites(points))
    return {
        "data": traces,
        "layout": {
            "xaxis": {"title": f"{data['unit'].capitalize()} a day in service", "tickformat": ","},
            "yaxis": {"title": f"Median life, {data['clock']}", "rangemode": "tozero", "tickformat": ","},
            "showlegend": False,
        },
    }


def sites(points: list[dict[str, Any]]) -> dict[str, Any]:
    return {
        "type": "scatter",
        "mode": "markers",
        "x": [round(point["duty"], 2) for point in points],
        "y": [round(point["estimate"], 2) for point in points],
        "customdata": [point["site"] for point in points],
        "marker": {"symbol": "circle", "size": 8, "color": "var(--ink)"},
        "error_y": {
            "type": "data",
            "symmetric": False,
            "array": [round(point["upper"] - point["estimate"], 2) for point in points],
            "arrayminus": [round(point["estimate"] - point["lower"], 2) for point in points],
            "color": "var(--soft)",
            "thickness": 1.2,
            "width": 4,
        },
        "hovertemplate": "%{customdata}: median %{y:,} at %{x:,} a day<extra></extra>",
        "showlegend": False,
    }
