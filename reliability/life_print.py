"""What stands on the two sheets of paper: no more than fits on them, and where the rest is."""

from __future__ import annotations

from typing import Any

from fleet.formats import number
from reliability import life_words as words
from reliability.charts.groups import drawn_groups
from reliability.charts.survival import at_risk_table
from reliability.life_page import few_tables, group_table, plot_chart, rank_in, survival_chart
from reliability.life_panels import PANELS

Document = dict[str, Any]
OTHER_SENTENCES = 2
WARNINGS = 3
GROUP_ROWS = 8
FEW_ROWS = 8
LEFT_OUT_ROWS = 6
PAPER_LETTERS = 10
PLOT_NOTE = (
    "Points: what was seen. Line and tint: the Weibull of all lives as one population and its band. Bars at 10 and "
    "50 %: B10 and median as in the table."
)
# The panels in a sentence each: what a decision needs on the first sheet, what an engineer asks on the second.
FIRST_SHEET = ("incidence", "stand_outs", "trend")
SECOND_SHEET = ("distributions", "clocks", "duty")


def sheets_of(document: Document, panels: Document, ranks: dict[str, int], names: dict[str, str]) -> dict[str, Any]:
    """Everything of a document with at least one group, cut to the two sheets in words, never silently."""
    drawn = drawn_groups(document)
    main = words.main_group(document)
    rest = [
        group for group in document["groups"] if group is not main and len(document["groups"]) <= OTHER_SENTENCES + 1
    ]
    survival = survival_chart(document, drawn, ranks) if drawn else None
    plot = plot_chart(document, drawn, ranks) if any(group["failures"] for group in drawn) else None
    few = few_tables(document)
    table = group_table(document, names, "")
    groups_left = len(table["rows"][GROUP_ROWS:]) + len(document["more_groups"])
    return {
        "lead": words.with_soft_interval(main["sentence"]) if main else "",
        "lead_rank": rank_in(document, main, ranks) if main else None,
        "sentences": [words.with_soft_interval(group["sentence"]) for group in rest],
        "survival": survival and {**on_paper(survival), "columns": None, "notes": None},
        "at_risk": at_risk_table(document) if drawn else None,
        "groups": {**table, "rows": table["rows"][:GROUP_ROWS]},
        "groups_left": f"{number(groups_left)} more groups stand in the book." if groups_left else "",
        "method_line": words.method_line(document),
        "told": told(panels, FIRST_SHEET),
        "warnings": document["warnings"][:WARNINGS],
        "warnings_left": max(0, len(document["warnings"]) - WARNINGS),
        "plot": plot and {**on_paper(plot), "size": "", "columns": None, "notes": [PLOT_NOTE]},
        "fit": fit_table(panels.get("distributions")),
        "bends": bends(panels.get("distributions")),
        "modes": modes_table(panels.get("incidence")),
        "asked": told(panels, SECOND_SHEET),
        "few": [{**each, "rows": each["rows"][:FEW_ROWS]} for each in few[:1]],
        "left_out_sentence": words.left_out_sentence(document),
        "left_out_rows": LEFT_OUT_ROWS,
    }


def on_paper(chart: Document) -> Document:
    """The same chart with letters for paper."""
    layout = dict(chart["figure"]["layout"])
    for axis in ("xaxis", "yaxis"):
        layout[axis] = {**layout[axis], "title": {"text": layout[axis]["title"], "font": {"size": PAPER_LETTERS}}}
    layout |= {"font": {"size": PAPER_LETTERS}, "margin": {"l": 44, "r": 8, "t": 6, "b": 34}}
    return {**chart, "figure": {**chart["figure"], "layout": layout}}


def told(panels: Document, keys: tuple[str, ...]) -> list[dict[str, str]]:
    titles = {panel.key: panel.title for panel in PANELS}
    return [{"title": titles[key], "words": panels[key]["sentence"]} for key in keys if key in panels]


def fit_table(data: Document | None) -> Document | None:
    """The curves through the main design's lives."""
    from reliability.life_fit import page
    from reliability.life_panels import main_stratum

    if not data or data.get("refused"):
        return None
    return page({**data, "groups": [main_stratum(data["groups"])]})["tables"][0]


def bends(data: Document | None) -> list[str]:
    from reliability.life_fit import warnings

    return [] if not data or data.get("refused") else warnings(data)[:1]


def modes_table(data: Document | None) -> Document | None:
    from reliability.life_modes import page

    if not data or data.get("refused"):
        return None
    table = page(data)["tables"][0]
    return {**table, "rows": [row[:-1] for row in table["rows"][:6]], "columns": table["columns"][:-1]}
