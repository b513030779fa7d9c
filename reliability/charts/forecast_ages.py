"""How old the parts in service are: a bar a band of ages, by design."""

from __future__ import annotations

from typing import Any

from fleet.part_styles import part_style

Document = dict[str, Any]
Figure = dict[str, Any]
HATCHES = ("", "/", "x", ".", "\\", "-", "|", "+")  # beside colours, so that designs differ in grey too


def ages_figure(document: Document, ranks: dict[str, int]) -> Figure:
    """Bars of the designs upon each other, in their colours."""
    profile = document["age_profile"]
    data = [
        {
            "type": "bar",
            "name": part,
            "x": [(row["age_from"] + row["age_to"]) / 2 for row in rows],
            "width": [row["age_to"] - row["age_from"] for row in rows],
            "y": [row["count"] for row in rows],
            "marker": {
                "color": part_style(ranks.get(part, 0)).color,
                "line": {"color": "var(--paper)", "width": 1},
                "pattern": {
                    "shape": HATCHES[ranks.get(part, 0) % len(HATCHES)],
                    "fillmode": "overlay",
                    "fgcolor": "var(--paper)",
                    "size": 7,
                    "solidity": 0.16,
                },
            },
            "customdata": [[row["age_from"], row["age_to"]] for row in rows],
            "hovertemplate": f"{part}: %{{y}} aged %{{customdata[0]:,.0f}} to %{{customdata[1]:,.0f}}<extra></extra>",
        }
        for part, rows in by_part(profile).items()
    ]
    layout = {
        "barmode": "stack",
        "bargap": 0,
        "xaxis": {"title": f"Age, {document['clock']}", "rangemode": "tozero", "tickformat": ",.0f"},
        "yaxis": {"title": "Parts"},
        "showlegend": len(data) > 1,
        "margin": {"l": 56, "r": 16, "t": 12, "b": 52},
    }
    return {"data": data, "layout": layout}


def by_part(profile: list[dict[str, Any]]) -> dict[str, list[dict[str, Any]]]:
    rows: dict[str, list[dict[str, Any]]] = {}
    for row in profile:
        rows.setdefault(row["part"], []).append(row)
    return rows


def ages_table(document: Document) -> dict[str, Any]:
    """One line a band of ages, one column a design."""
    parts = list(by_part(document["age_profile"]))
    columns = [
        {"key": "age", "label": f"Age, {document['clock']}"},
        *({"key": part, "label": part, "numeric": True} for part in parts),
    ]
    counts = {(row["age_from"], row["part"]): row["count"] for row in document["age_profile"]}
    bands = sorted({(row["age_from"], row["age_to"]) for row in document["age_profile"]})
    rows = [
        [f"{low:,.0f} to {high:,.0f}".replace(",", "\u00a0"), *(counts.get((low, part)) for part in parts)]
        for low, high in bands
    ]
    return {"columns": columns, "rows": rows}
