"""Cost by the age of planned replacement, with what the records leave open as a band."""

from __future__ import annotations

from typing import Any

from fleet.formats import number, rounded

Document = dict[str, Any]
Figure = dict[str, Any]
ROWS = 20


def cost_figure(document: Document, currency: str) -> Figure:
    """Band and curve, the flat region thicker, the best age as a mark, waiting for failures as a dashed line."""
    told = document["told"]
    curve, never = told["curve"], told["never"]
    shared = {"type": "scatter", "mode": "lines", "x": curve["age"]}
    unseen = {"hoverinfo": "skip", "showlegend": False}
    first, last = curve["age"][0], curve["age"][-1]
    data: list[dict[str, Any]] = [
        {**shared, **unseen, "y": curve["lower"], "line": {"width": 0}},
        {
            **shared,
            **unseen,
            "y": curve["upper"],
            "line": {"width": 0},
            "fill": "tonexty",
            "fillcolor": "var(--fan-80)",
        },
        {
            **shared,
            "y": curve["cost"],
            "name": "planned replacement at that age",
            "line": {"color": "var(--blue)", "width": 2.2},
            "hovertemplate": "at %{x:,.0f}: %{y:,.0f}<extra></extra>",
        },
        {
            "type": "scatter",
            "mode": "lines",
            "x": [first, last],
            "y": [never, never],
            "name": "waiting for failures",
            "line": {"color": "var(--ink)", "width": 1.6, "dash": "6px,4px"},
            "hovertemplate": "waiting for failures: %{y:,.0f}<extra></extra>",
        },
    ]
    if told["age"] is not None:
        low, high = told["flat"]
        near = [
            (age, cost) for age, cost in zip(curve["age"], curve["cost"], strict=True) if low <= age <= (high or last)
        ]
        data.append(
            {
                "type": "scatter",
                "mode": "lines",
                "x": [age for age, _ in near],
                "y": [cost for _, cost in near],
                "name": f"within {100 * told['flat_within']:.0f} % of the best",
                "line": {"color": "var(--blue)", "width": 6},
                "hoverinfo": "skip",
            }
        )
        data.append(
            {
                "type": "scatter",
                "mode": "markers",
                "x": [told["age"]],
                "y": [told["cost"]],
                "name": "best age",
                "marker": {"symbol": "diamond", "size": 11, "color": "var(--ink)"},
                "hovertemplate": "best at %{x:,.0f}: %{y:,.0f}<extra></extra>",
            }
        )
    # what costs a multiple of failures alone is of no interest, and would flatten the rest
    top = 1.6 * max(never, told["never_band"][1], min(curve["upper"]))
    shown = min(last, max(2.5 * (told["age"] or last), 1.5 * document["oldest"]))
    layout = {
        "xaxis": {"title": f"Age, {document['clock']}", "range": [0, shown], "tickformat": ",.0f"},
        "yaxis": {"title": f"{currency} a quarter", "range": [0, top], "tickformat": ",.0f"},
        "showlegend": True,
    }
    return {"data": data, "layout": layout}


def cost_table(document: Document) -> dict[str, Any]:
    """The curve at some twenty ages."""
    curve = document["told"]["curve"]
    columns = [
        {"key": "age", "label": f"Replaced at, {document['clock']}", "numeric": True, "digits": 0},
        {"key": "cost", "label": "Cost a quarter", "numeric": True},
        {"key": "band", "label": "95 in 100", "numeric": True},
    ]
    step = max(1, len(curve["age"]) // ROWS)
    rows = [
        [
            number(rounded(curve["age"][place], 3), 0),
            number(rounded(curve["cost"][place], 3), 0),
            f"{number(rounded(curve['lower'][place], 3), 0)} to {number(rounded(curve['upper'][place], 3), 0)}",
        ]
        for place in range(step - 1, len(curve["age"]), step)
    ]
    return {"columns": columns, "rows": rows}
