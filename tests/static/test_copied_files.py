"""What was copied in: as listed, with its licence beside it, and Plotly's rules as the library means them."""

from __future__ import annotations

import hashlib
import json
from pathlib import Path

import pytest

from tests.static.plotly_rules import LIBRARY, STYLE_SHEET, injected_rules, style_sheet

STATIC = Path(__file__).resolve().parents[2] / "static"
ENTRIES = [
    (folder, entry)
    for folder in ("vendor", "font")
    for entry in json.loads((STATIC / folder / "manifest.json").read_text(encoding="utf-8"))
]


def named(value: str | dict[str, str]) -> str:
    return value["file"] if isinstance(value, dict) else value


@pytest.mark.parametrize(("folder", "entry"), ENTRIES, ids=named)
def test_copied_file_is_as_listed(folder: str, entry: dict[str, str]) -> None:
    path = STATIC / folder / entry["file"]
    assert hashlib.sha256(path.read_bytes()).hexdigest() == entry["sha256"]
    assert entry["name"]
    assert entry["version"]
    assert entry["licence"]


LICENCE_WORDS = {
    "0BSD": "Permission to use, copy, modify, and/or distribute this software",
    "MIT": "Permission is hereby granted, free of charge",
    "OFL-1.1": "SIL Open Font License, Version 1.1",
}


@pytest.mark.parametrize(("folder", "entry"), ENTRIES, ids=named)
def test_licence_lies_beside_it(folder: str, entry: dict[str, str]) -> None:
    licence = (STATIC / folder / entry["file"]).parent / "LICENSE"
    assert LICENCE_WORDS[entry["licence"]] in licence.read_text(encoding="utf-8")


def test_versions_are_those_written_in_the_files() -> None:
    versions = {entry["file"]: entry["version"] for _, entry in ENTRIES}
    plotly = LIBRARY.read_text(encoding="utf-8")
    assert f"plotly.js (basic - minified) v{versions['plotly/plotly-basic.min.js']}" in plotly[:200]
    htmx = (STATIC / "vendor" / "htmx" / "htmx.min.js").read_text(encoding="utf-8")
    assert f'version:"{versions["htmx/htmx.min.js"]}"' in htmx


def test_plotly_style_sheet_holds_what_the_library_would_inject() -> None:
    source = LIBRARY.read_text(encoding="utf-8")
    assert len(injected_rules(source)) > 50
    assert STYLE_SHEET.read_text(encoding="utf-8") == style_sheet(source)
