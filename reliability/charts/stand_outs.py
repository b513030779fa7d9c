"""How many times as fast as a typical one the parts of each site or lot fail, with intervals, the fastest on top."""

from __future__ import annotations

from typing import Any

Figure = dict[str, Any]
MOST_ROWS = 16


def stand_outs_figure(data: dict[str, Any], family: dict[str, Any]) -> Figure:
    rows = family["rows"][:MOST_ROWS][::-1]
    highest = max((row["multiplier"]["upper"] for row in rows), default=1.0)
    traces = [
        dots([row for row in rows if not row["stands_out"]], "not shown to stand out", "var(--ink)", "circle-open"),
        dots([row for row in rows if row["stands_out"]], "stands out", "var(--amber)", "diamond"),
    ]
    return {
        "data": [trace for trace in traces if trace["x"]],
        "layout": {
            "xaxis": {
                "title": "Times as fast as a typical one",
                "rangemode": "tozero",
                "range": [0, 1.05 * max(highest, data["factor"])],
            },
            "yaxis": {
                "type": "category",
                "categoryorder": "array",
                "categoryarray": [row["label"] for row in rows],
                "dtick": 1,
                "tickfont": {"size": 12},
            },
            "shapes": [upright(1.0, "var(--rule)"), upright(data["factor"], "var(--soft)", "4px,4px")],
            "showlegend": True,
        },
    }


def upright(at: float, colour: str, dash: str = "solid") -> dict[str, Any]:
    line = {"color": colour, "width": 1, "dash": dash}
    return {"type": "line", "x0": at, "x1": at, "yref": "paper", "y0": 0, "y1": 1, "line": line, "layer": "below"}


def dots(rows: list[dict[str, Any]], name: str, colour: str, symbol: str) -> dict[str, Any]:
    times = [row["multiplier"] for row in rows]
    return {
        "type": "scatter",
        "mode": "markers",
        "name": name,
        "x": [round(each["estimate"], 3) for each in times],
        "y": [row["label"] for row in rows],
        "customdata": [f"{row['failures']} failed, {row['expected']:.1f} expected" for row in rows],
        "marker": {"symbol": symbol, "size": 9, "color": colour},
        "error_x": {
            "type": "data",
            "symmetric": False,
            "array": [round(each["upper"] - each["estimate"], 3) for each in times],
            "arrayminus": [round(each["estimate"] - each["lower"], 3) for each in times],
            "color": colour,
            "thickness": 1.4,
            "width": 4,
        },
        "hovertemplate": "%{y}: %{x:.2f} times as fast, %{customdata}<extra></extra>",
    }
