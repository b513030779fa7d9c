"""A workbook with one sheet for each file. Its cells become the text that a CSV file would hold."""

from __future__ import annotations

import datetime as dt
import io
import re
import zipfile
from collections.abc import Callable, Iterator
from typing import Any

from fleet.transfer.problems import Unreadable
from fleet.transfer.sources import LONGEST_CELL, MOST_COLUMNS, Table, open_archive

# A row or a cell of a sheet, or where its cells begin, under whatever prefix, with all attributes.
ROW_OR_CELL = re.compile(rb"""<(?:[\w.-]+:)?(row|c|sheetData)(?=[\s/>])((?:[^>"']|"[^"]*"|'[^']*')*)>""")
PLACE = re.compile(rb"""(?:^|\s)r\s*=\s*["']\s*([A-Za-z]{0,9})(\d{1,9})""")
OTHER_SORTS = ("content.xml", "xl/workbook.bin")  # the reader would take these archives for workbooks of another sort
LARGE_AREA = 5_000_000
MOST_EMPTINESS = 10  # cells of the area for each cell that holds something


def open_workbook(name: str, content: bytes) -> list[Table]:
    from python_calamine import CalamineWorkbook

    with open_archive(name, content) as archive:
        parts = {part.replace("\\", "/").lower() for part in archive.namelist()}
        if "xl/workbook.xml" not in parts or not parts.isdisjoint(OTHER_SORTS):
            raise Unreadable("is no .xlsx workbook. Save it as .xlsx.", file=name)
        bound_areas(name, archive)
    try:
        workbook = CalamineWorkbook.from_filelike(io.BytesIO(content))
        sheets = [(sheet, workbook.get_sheet_by_name(sheet)) for sheet in workbook.sheet_names]
    except Exception as fault:  # the reader's own errors have no common base
        raise Unreadable(f"cannot be read as a workbook ({fault}). Save it as .xlsx again.", file=name) from None
    return [Table(title, title.strip().lower(), rows_of(sheet)) for title, sheet in sheets if sheet.end is not None]


def bound_areas(name: str, archive: zipfile.ZipFile) -> None:
    """The reader lays a sheet out whole: one cell in the far corner would take all memory.

    A sheet may lie anywhere in the archive, and a row or a cell that names no place follows the one before it.
    """
    for entry in archive.infolist():
        is_sheet, cells, width, height, row, column = False, 0, 0, 0, 0, 0
        for tag, attributes in rows_and_cells(archive, entry):
            place = PLACE.search(attributes)
            if tag == b"sheetData":
                is_sheet = True
            elif tag == b"row":
                row, column = int(place[2]) if place else row + 1, 0
            else:
                cells += 1
                column = column_number(place[1]) if place else column + 1
                row = int(place[2]) if place else row
                width, height = max(width, column), max(height, row)
        if not is_sheet:
            continue
        if width > MOST_COLUMNS:
            raise Unreadable(
                f"has a sheet of more than {MOST_COLUMNS} columns. Delete those without records.", file=name
            )
        if width * height > max(LARGE_AREA, cells * MOST_EMPTINESS):
            raise Unreadable("has a sheet that is almost empty but very long. Delete its empty rows.", file=name)


def rows_and_cells(archive: zipfile.ZipFile, entry: zipfile.ZipInfo) -> Iterator[tuple[bytes, bytes]]:
    with archive.open(entry) as sheet:
        kept = b""
        while piece := sheet.read(1 << 20):
            piece = kept + piece
            end = piece.rfind(b"<")
            kept, piece = piece[end:], piece[:end]
            yield from ROW_OR_CELL.findall(piece)
        yield from ROW_OR_CELL.findall(kept)


def column_number(letters: bytes) -> int:
    number = 0
    for letter in letters.upper():
        number = number * 26 + letter - 64
    return number


def rows_of(sheet: Any) -> Callable[[], Iterator[tuple[int, list[str]]]]:
    def rows() -> Iterator[tuple[int, list[str]]]:
        for number, cells in enumerate(sheet.to_python(skip_empty_area=False), start=1):
            yield number, [cell_text(cell) for cell in cells]

    return rows


def cell_text(value: Any) -> str:
    """Whole numbers lose the point that a workbook gives them, so that code 147 stays 147."""
    if isinstance(value, str):
        return value.strip()[: LONGEST_CELL + 1]
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, float):
        return str(int(value)) if value.is_integer() and abs(value) < 2**53 else repr(value)
    if isinstance(value, dt.datetime | dt.date):
        return value.isoformat()
    return str(value)
