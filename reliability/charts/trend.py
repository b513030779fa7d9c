"""Failures a position as it grows older, beside what renewal alone would give."""

from __future__ import annotations

from typing import Any

Figure = dict[str, Any]
FINEST_STEP = 0.002  # of the height: finer steps are not seen


def trend_figure(data: dict[str, Any]) -> Figure:
    curve, renewal = data["curve"], data["renewal"]
    kept = seen_steps(curve["mean"])
    ages = [0.0, *(curve["age"][place] for place in kept), curve["last_age"]]
    shared = {"type": "scatter", "mode": "lines", "line": {"shape": "hv", "width": 0}, "x": ages}
    levels = {name: stepped(curve[name], kept) for name in ("mean", "lower", "upper")}
    traces: list[dict[str, Any]] = []
    if None not in levels["upper"]:
        quiet = {**shared, "hoverinfo": "skip", "showlegend": False}
        traces += [
            {**quiet, "y": levels["lower"]},
            {**quiet, "y": levels["upper"], "fill": "tonexty", "fillcolor": "var(--shade)"},
        ]
    traces.append(
        {
            **shared,
            "name": "seen",
            "y": levels["mean"],
            "line": {"shape": "hv", "color": "var(--ink)", "width": 2.4},
            "hovertemplate": "%{y:.2f} failures a position by %{x:,}<extra>seen</extra>",
        }
    )
    if renewal:
        traces.append(
            {
                "type": "scatter",
                "mode": "lines",
                "name": "expected by renewal alone",
                "x": [round(age, 2) for age in renewal["age"]],
                "y": [round(value, 4) for value in renewal["mean"]],
                "line": {"color": "var(--soft)", "width": 1.6, "dash": "6px,4px"},
                "hovertemplate": "%{y:.2f} expected by %{x:,}<extra>renewal</extra>",
            }
        )
    return {
        "data": traces,
        "layout": {
            "xaxis": {
                "title": f"Working age of the position, {data['clock']}",
                "range": [0, curve["last_age"]],
                "tickformat": ",",
            },
            "yaxis": {"title": "Failures a position", "rangemode": "tozero"},
            "showlegend": True,
        },
    }


def seen_steps(means: list[float]) -> list[int]:
    """Steps high enough to be seen."""
    least, last, kept = FINEST_STEP * means[-1], 0.0, []
    for place, mean in enumerate(means):
        if mean - last >= least or place == len(means) - 1:
            kept.append(place)
            last = mean
    return kept


def stepped(values: list[float | None], kept: list[int]) -> list[float | None]:
    levels = [values[place] for place in kept]
    rounded = [None if value is None else round(value, 4) for value in levels]
    return [0.0, *rounded, rounded[-1]]
