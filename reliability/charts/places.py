"""Money against modules that stand still for want of a part: a falling stair with its band."""

from __future__ import annotations

from typing import Any

Document = dict[str, Any]
Figure = dict[str, Any]


def money_figure(document: Document) -> Figure:
    """What waits on average after each purchase, 80 of 100 cases of the uncertain use around it."""
    steps = [{"money": 0.0, "waiting": document["now"], "words": "with what is kept today"}]
    steps += [
        {"money": step["money"], "waiting": step["waiting"], "words": f"{step['pieces']} × {step['part']}"}
        for step in document["curve"]
    ]
    money = [step["money"] for step in steps]
    shared = {
        "type": "scatter",
        "mode": "lines",
        "x": money,
        "hoverinfo": "skip",
        "showlegend": False,
        "line": {"shape": "hv", "width": 0},
    }
    upper = {"y": [step["waiting"]["upper"] for step in steps], "fill": "tonexty", "fillcolor": "var(--fan-80)"}
    data: list[Figure] = [
        {**shared, "y": [step["waiting"]["lower"] for step in steps]},
        {**shared, **upper},
        {
            "type": "scatter",
            "mode": "lines+markers",
            "x": money,
            "y": [step["waiting"]["mean"] for step in steps],
            "customdata": [step["words"] for step in steps],
            "line": {"shape": "hv", "color": "var(--blue)", "width": 2.2},
            "marker": {"color": "var(--blue)", "size": 5},
            "hovertemplate": "%{x:.0f}: %{y:.2f} modules wait<br>%{customdata}<extra></extra>",
        },
    ]
    layout = {
        "xaxis": {"title": f"Money spent, {document['currency']}", "rangemode": "tozero", "tickformat": ","},
        "yaxis": {"title": "Modules that wait for a part", "rangemode": "tozero"},
        "showlegend": False,
    }
    return {"data": data, "layout": layout}
