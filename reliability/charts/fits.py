"""Three curves through the same lives, over the steps of what was seen."""

from __future__ import annotations

from typing import Any

Figure = dict[str, Any]
LOOKS = {  # dash and width: the curve in use is the strongest
    "weibull": ("solid", 2.2),
    "lognormal": ("7px,4px", 1.8),
    "exponential": ("2px,4px", 1.8),
}


def fits_figure(data: dict[str, Any], group: dict[str, Any], names: dict[str, str]) -> Figure:
    curves = group["curves"]
    traces: list[dict[str, Any]] = [
        {
            "type": "scatter",
            "mode": "lines",
            "name": "what was seen",
            "x": curves["seen"]["age"],
            "y": curves["seen"]["survival"],
            "line": {"shape": "hv", "color": "var(--edge)", "width": 3.5},
            "hovertemplate": "%{y:.0%} still work at %{x:,}<extra>what was seen</extra>",
        }
    ]
    for name, survival in curves["fitted"].items():
        dash, width = LOOKS[name]
        traces.append(
            {
                "type": "scatter",
                "mode": "lines",
                "name": names[name],
                "x": curves["age"],
                "y": survival,
                "line": {"color": "var(--ink)", "width": width, "dash": dash},
                "hovertemplate": "%{y:.0%} still work at %{x:,}<extra>" + names[name] + "</extra>",
            }
        )
    return {
        "data": traces,
        "layout": {
            "xaxis": {"title": f"Age, {data['clock']}", "range": [0, curves["age"][-1]], "tickformat": ","},
            "yaxis": {"title": "Still working", "range": [0, 1.02], "tickformat": ".0%"},
            "showlegend": True,
        },
    }
