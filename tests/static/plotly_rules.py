"""Reads the style rules that Plotly would inject, out of the vendored library; run it to write plotly.css anew."""

from __future__ import annotations

import re
from pathlib import Path

FOLDER = Path(__file__).resolve().parents[2] / "static" / "vendor" / "plotly"
LIBRARY = FOLDER / "plotly-basic.min.js"
STYLE_SHEET = FOLDER / "plotly.css"


def injected_rules(source: str) -> list[tuple[str, str]]:
    """Selector and declarations in the order the library adds them (each one in front of the last)."""
    table = re.search(r'\{("X,X div":.*?)\};for\(', source, re.DOTALL)
    if table is None:
        raise AssertionError("the library no longer holds its table of style rules: see how it styles itself now")
    pairs = re.findall(r"""(?:"([^"]*)"|\b(Y)):(?:'([^']*)'|"([^"]*)")(?:,|$)""", table.group(1))
    rules = []
    for quoted, bare, single, double in pairs:
        name = (quoted or bare).replace("X", ".js-plotly-plot .plotly").replace("Y", ".plotly-notifier")
        rules.append((name, single or double))
    return rules


def style_sheet(source: str) -> str:
    """The same rules as a style sheet; reversed, since the library inserts each rule before all others."""
    return "".join(f"{name}{{{body}}}\n" for name, body in reversed(injected_rules(source)))


if __name__ == "__main__":
    STYLE_SHEET.write_text(style_sheet(LIBRARY.read_text(encoding="utf-8")), encoding="utf-8")
