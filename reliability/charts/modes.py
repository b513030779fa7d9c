"""Cumulative incidence of failure modes, one layer upon the other."""

from __future__ import annotations

from typing import Any

from fleet.part_styles import part_style

Figure = dict[str, Any]
FINEST_STEP = 0.0015  # of the height: finer steps are not seen
LAYERS = 8
FIRST_STYLE = 3  # the first styles are those of the designs most often seen beside it


def incidence_figure(data: dict[str, Any], group: dict[str, Any]) -> Figure:
    """Layers in the order of the table, the most common mode at the bottom; the top line is the share failed."""
    start, last_age = group["given_survival_to"], group["last_age"]
    layers = [row["incidence"] for row in group["modes"]]
    if len(layers) > LAYERS:
        rest = [sum(values) for values in zip(*layers[LAYERS - 1 :], strict=True)]
        layers = [*layers[: LAYERS - 1], rest]
    ages, shares = thinned(group["ages"], layers, start, last_age)
    traces: list[dict[str, Any]] = []
    below = [0.0] * len(ages)
    for place, values in enumerate(shares):
        top = [round(under + value, 5) for under, value in zip(below, values, strict=True)]
        more = len(group["modes"]) > LAYERS and place == LAYERS - 1
        traces.append(layer("other modes" if more else group["modes"][place]["name"], place, ages, top, values))
        below = top
    return {
        "data": traces,
        "layout": {
            "xaxis": {"title": f"Age, {data['clock']}", "range": [0, 1.02 * last_age], "tickformat": ","},
            "yaxis": {"title": "Failed", "range": [0, 1.02 * min(1.0, max(below) * 1.1 or 1.0)], "tickformat": ".0%"},
            "showlegend": True,
        },
    }


def layer(name: str, place: int, ages: list[float], top: list[float], own: list[float]) -> dict[str, Any]:
    style = part_style(FIRST_STYLE + place)
    return {
        "type": "scatter",
        "mode": "lines",
        "name": name,
        "x": ages,
        "y": top,
        "customdata": own,
        "line": {"shape": "hv", "color": style.color, "dash": style.dash, "width": 2},
        "fill": "tozeroy" if place == 0 else "tonexty",
        "fillcolor": style.wash,
        "hovertemplate": "%{customdata:.1%} failed so by %{x:,}<extra>" + name + "</extra>",
    }


def thinned(
    ages: list[float], layers: list[list[float]], start: float, last_age: float
) -> tuple[list[float], list[list[float]]]:
    """From the start to the last age seen, without steps too small to be seen."""
    kept = [start]
    levels: list[list[float]] = [[0.0] for _ in layers]
    for place, age in enumerate(ages):
        risen = any(values[place] - own[-1] > FINEST_STEP for values, own in zip(layers, levels, strict=True))
        if risen or place == len(ages) - 1:
            kept.append(age)
            for values, own in zip(layers, levels, strict=True):
                own.append(round(values[place], 5))
    if last_age > kept[-1]:
        kept.append(last_age)
        for own in levels:
            own.append(own[-1])
    return kept, levels
