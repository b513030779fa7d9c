"""Files as they come: folders, archives, workbooks, encodings, and files that mean harm."""

from __future__ import annotations

import datetime as dt
import io
import re
import struct
import zipfile
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
import xlsxwriter

from fleet.transfer import sources
from fleet.transfer.problems import Unreadable
from fleet.transfer.sources import open_bytes, open_source


def rows_of(name: str, content: bytes) -> list[list[str]]:
    return [cells for _, cells in open_bytes(name, content)[0].rows()]


def workbook(sheets: dict[str, list[list[Any]]]) -> bytes:
    content = io.BytesIO()
    with xlsxwriter.Workbook(content) as book:
        day = book.add_format({"num_format": "yyyy-mm-dd"})
        for name, rows in sheets.items():
            sheet = book.add_worksheet(name)
            for number, row in enumerate(rows):
                for place, value in enumerate(row):
                    if hasattr(value, "year"):
                        sheet.write_datetime(number, place, value, day)
                    else:
                        sheet.write(number, place, value)
    return content.getvalue()


@pytest.mark.parametrize("content", [b"\xef\xbb\xbfsite,name\nA,B\n", b"site;name\r\nA;B\r\n", b'"site","name"\nA,"B"'])
def test_bom_semicolons_and_quotes(content: bytes) -> None:
    assert rows_of("sites.csv", content) == [["site", "name"], ["A", "B"]]


def test_a_cell_may_hold_lines_and_separators() -> None:
    assert rows_of("sites.csv", b'site,name\nA,"two\nlines, and more"\n')[1] == ["A", "two\nlines, and more"]


@pytest.mark.parametrize("content", ["site,name\nA,Ávila\n".encode("latin-1"), "site,name\n".encode("utf-16")])
def test_other_encodings_are_refused_in_words(content: bytes) -> None:
    with pytest.raises(Unreadable, match=r"is not UTF-8 text. Save it as “CSV UTF-8”"):
        rows_of("sites.csv", content)


def test_an_open_quotation_is_refused() -> None:
    with pytest.raises(Unreadable, match="quotation mark is missing"):
        rows_of("sites.csv", b'site,name\nA,"B\n')


def test_a_cell_without_end_is_refused() -> None:
    with pytest.raises(Unreadable, match="more than 20000 characters"):
        rows_of("sites.csv", b'site,name\nA,"' + b"x" * 30_000 + b'"\n')


def test_a_folder_with_its_files(tmp_path: Path) -> None:
    (tmp_path / "sites.csv").write_text("site\nA\n")
    (tmp_path / "read me.txt").write_text("hello")

    assert [table.name for table in open_source(tmp_path)] == ["sites"]


def test_nothing_to_read(tmp_path: Path) -> None:
    with pytest.raises(Unreadable, match="No records file is in it"):
        open_source(tmp_path)
    with pytest.raises(Unreadable, match="does not exist"):
        open_source(tmp_path / "none.zip")
    with pytest.raises(Unreadable, match="is no records file"):
        open_bytes("picture.png", b"")


def test_an_archive_made_elsewhere() -> None:
    content = io.BytesIO()
    with zipfile.ZipFile(content, "w") as archive:
        archive.writestr("fleet/sites.csv", "site\nA\n")
        archive.writestr("__MACOSX/fleet/._sites.csv", "junk")
        archive.writestr("fleet/notes.txt", "junk")

    assert [table.file for table in open_bytes("fleet.zip", content.getvalue())] == ["sites.csv"]


def test_the_same_file_twice_in_an_archive() -> None:
    content = io.BytesIO()
    with zipfile.ZipFile(content, "w") as archive:
        archive.writestr("a/sites.csv", "site\nA\n")
        archive.writestr("b/sites.csv", "site\nB\n")

    with pytest.raises(Unreadable, match="holds sites twice"):
        open_bytes("fleet.zip", content.getvalue())


def test_a_bomb_is_refused_by_its_real_size(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(sources, "MOST_BYTES", 5_000_000)
    content = io.BytesIO()
    with zipfile.ZipFile(content, "w", zipfile.ZIP_DEFLATED) as archive:
        archive.writestr("sites.csv", b"0" * 20_000_000)
    packed = content.getvalue()
    assert len(packed) < 50_000

    with pytest.raises(Unreadable, match="unpacks to more than"):
        open_bytes("fleet.zip", packed)
    with pytest.raises(Unreadable, match="is damaged"):
        open_bytes("fleet.zip", packed.replace(struct.pack("<L", 20_000_000), struct.pack("<L", 2_000)))


def test_many_entries_locked_and_broken_archives() -> None:
    content = io.BytesIO()
    with zipfile.ZipFile(content, "w") as archive:
        for number in range(300):
            archive.writestr(f"{number}.csv", "")
    with pytest.raises(Unreadable, match="more than 200"):
        open_bytes("fleet.zip", content.getvalue())
    for name in ("fleet.zip", "fleet.xlsx"):
        with pytest.raises(Unreadable, match="is damaged"):
            open_bytes(name, b"PK\x03\x04 nothing more")


def test_a_workbook_gives_the_text_of_a_file() -> None:
    head = ["site", "name", "hours_per_day", "reports_at_once", "records_from"]
    first = [147, "=A1", 2.5, True, dt.date(2024, 3, 9)]
    content = workbook({"Sites": [head, first, ["0147", "", "", "", ""]], "empty": []})
    (table,) = open_bytes("fleet.xlsx", content)

    rows = [cells for _, cells in table.rows()]
    assert table.name == "sites"
    assert rows[1][0] == "147"
    assert rows[1][2:] == ["2.5", "yes", "2024-03-09"]
    assert rows[2][0] == "0147"


def changed_workbook(change: Callable[[str, bytes], tuple[str, bytes]]) -> bytes:
    """A sound workbook, entry by entry made into another."""
    content = workbook({"sites": [["site"], ["A"]]})
    made = io.BytesIO()
    with zipfile.ZipFile(io.BytesIO(content)) as old, zipfile.ZipFile(made, "w", zipfile.ZIP_DEFLATED) as new:
        for entry in old.infolist():
            new.writestr(*change(entry.filename, old.read(entry)))
    return made.getvalue()


FAR = [
    b'<row r="1048576"><c r="CA1048576"><v>1</v></c></row>',
    b"<row r='1048576'><c r='CA1048576'><v>1</v></c></row>",
    b'<row r="1048576"><c r = "ca1048576"><v>1</v></c></row>',
    b'<row r="1048576"><c s=">" r="CA1048576"><v>1</v></c></row>',
    b'<x:row r="1048576"><x:c r="CA1048576"><v>1</v></x:c></x:row>',
    b'<row r="1048576">' + b"<c><v>1</v></c>" * 80 + b"</row>",
]


@pytest.mark.parametrize("cell", FAR)
def test_a_workbook_whose_last_cell_lies_far_away(cell: bytes) -> None:
    """Laid out whole it takes gigabytes, and the worker that tries is ended by the system."""

    def far(name: str, body: bytes) -> tuple[str, bytes]:
        return name, body.replace(b"</sheetData>", cell + b"</sheetData>")

    with pytest.raises(Unreadable, match="almost empty but very long"):
        open_bytes("fleet.xlsx", changed_workbook(far))


def test_a_far_cell_is_found_wherever_the_sheet_lies() -> None:
    def elsewhere(name: str, body: bytes) -> tuple[str, bytes]:
        body = body.replace(b"worksheets/sheet1.xml", b"others/one.bin").replace(
            b"</sheetData>", FAR[0] + b"</sheetData>"
        )
        return name.replace("worksheets/sheet1.xml", "others/one.bin"), body

    with pytest.raises(Unreadable, match="almost empty but very long"):
        open_bytes("fleet.xlsx", changed_workbook(elsewhere))


def test_a_workbook_of_many_columns_or_of_another_sort() -> None:
    with pytest.raises(Unreadable, match="more than 100 columns"):
        open_bytes("fleet.xlsx", workbook({"sites": [["x"] * 150]}))
    with pytest.raises(Unreadable, match="more than 100 columns"):
        open_bytes("fleet.xlsx", changed_workbook(lambda name, body: (name, re.sub(rb'(<c) r="[A-Z]+\d+"', rb"\1", body)
                   .replace(b"<c ", b"<c/>" * 150 + b"<c "))))  # fmt: skip
    for other in ("content.xml", "xl/workbook.bin"):
        with pytest.raises(Unreadable, match=r"is no \.xlsx workbook"):
            open_bytes("fleet.xlsx", changed_workbook(lambda name, body, other=other: (
                name.replace("docProps/app.xml", other), body)))  # fmt: skip


def test_a_list_of_far_formulas_is_no_sheet() -> None:
    chain = b'<calcChain><c r="CA1048576" i="1"/></calcChain>'
    content = changed_workbook(lambda name, body: (
        (name.replace("docProps/app.xml", "xl/calcChain.xml"), chain if "app.xml" in name else body)
    ))  # fmt: skip
    assert rows_of("fleet.xlsx", content) == [["site"], ["A"]]
