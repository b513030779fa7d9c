"""How much the same lives vary on each clock, with intervals."""

from __future__ import annotations

from typing import Any

from fleet.part_styles import part_style

Figure = dict[str, Any]


def clocks_figure(data: dict[str, Any], ranks: dict[str, int]) -> Figure:
    """A line a design; on each clock a point with its interval. The lower, the better the clock explains the lives."""
    traces = []
    for place, group in enumerate(group for group in data["groups"] if group["clocks"]):
        style, clocks = part_style(ranks.get(group["group"], place)), group["clocks"]
        values = list(clocks.values())
        traces.append(
            {
                "type": "scatter",
                "mode": "markers",
                "name": group["group"],
                "x": list(clocks),
                "y": [round(value["estimate"], 4) for value in values],
                "marker": {"symbol": style.symbol, "size": 10, "color": style.color},
                "error_y": {
                    "type": "data",
                    "symmetric": False,
                    "array": [round(value["upper"] - value["estimate"], 4) for value in values],
                    "arrayminus": [round(value["estimate"] - value["lower"], 4) for value in values],
                    "color": style.color,
                    "thickness": 1.4,
                    "width": 5,
                },
                "hovertemplate": "%{y:.2f} in %{x}<extra>" + group["group"] + "</extra>",
            }
        )
    return {
        "data": traces,
        "layout": {
            "xaxis": {"type": "category", "range": [-0.5, len(data["known"]) - 0.5]},
            "yaxis": {"title": "Standard deviation over mean", "rangemode": "tozero"},
            "scattermode": "group",
            "showlegend": len(traces) > 1,
        },
    }
