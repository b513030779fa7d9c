"""A part looks the same in life lines, charts and keys, and never differs by colour alone."""

from __future__ import annotations

import re
from pathlib import Path

from fleet.part_styles import PART_STYLES, part_style

LOOK = Path(__file__).resolve().parents[2] / "static" / "look"


def test_each_part_has_its_own_dash_and_marker() -> None:
    assert len({style.dash for style in PART_STYLES}) == len(PART_STYLES) == 8
    assert len({style.symbol for style in PART_STYLES}) == len(PART_STYLES)
    assert len({style.path for style in PART_STYLES}) == len(PART_STYLES)


def test_the_style_sheet_knows_every_part() -> None:
    tokens = (LOOK / "tokens.css").read_text(encoding="utf-8")
    lines = (LOOK / "lifelines.css").read_text(encoding="utf-8")
    dashes = set()
    for style in PART_STYLES:
        assert f"--{style.css}:" in tokens
        assert f"--{style.css}-wash:" in tokens
        rule = re.search(rf"\.fit\.{style.css} \{{(.*?)\}}", lines, re.DOTALL)
        assert rule is not None
        dashes.add(re.sub(r"stroke: var\(--p\d\);", "", rule.group(1)).strip())
    assert len(dashes) == len(PART_STYLES)
    assert "" in dashes  # one is a whole line


def test_marker_names_are_known_to_the_chart_library() -> None:
    import plotly.graph_objects as go

    for style in PART_STYLES:
        trace = go.Scatter(line={"color": style.color, "dash": style.dash}, marker={"symbol": style.symbol})
        assert trace.marker.symbol == style.symbol


def test_the_ninth_part_begins_again() -> None:
    assert part_style(0) is PART_STYLES[0]
    assert part_style(8) is PART_STYLES[0]
    assert part_style(7).css == "p8"
