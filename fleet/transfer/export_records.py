"""Records out of the book as a folder or ZIP of CSV, or as one workbook, from one moment of the book."""

from __future__ import annotations

import csv
import datetime as dt
import io
import zipfile
from collections.abc import Iterator
from contextlib import contextmanager
from decimal import Decimal
from pathlib import Path
from typing import IO, Any

from django.db import connection, transaction

from fleet.models import Book
from fleet.transfer.export_rows import ROWS
from fleet.transfer.kinds import ALL_KINDS
from fleet.transfer.problems import Unreadable
from fleet.transfer.scope import Scope
from fleet.transfer.sources import is_formula
from fleet.transfer.staging import on_sqlite, run

MOST_SHEET_ROWS = 1_048_576
EXACT_DIGITS = 16  # a workbook keeps so many; a number that needs more is written as text
FIRST_YEAR = (1980, 1, 1, 0, 0, 0)  # the same records always make the same archive


def write_export(path: Path, scope: Scope) -> dict[str, int]:
    """By the ending of the path: .zip, .xlsx, or a folder. Returns the rows of each file."""
    with one_moment():
        if path.suffix.lower() == ".zip":
            with path.open("xb") as target:
                return write_zip(target, scope)
        if path.suffix.lower() == ".xlsx":
            with path.open("xb") as target:
                return write_workbook(target, scope)
        path.mkdir(parents=True, exist_ok=True)
        return write_folder(path, scope)


@contextmanager
def one_moment() -> Iterator[None]:
    """Everything is read as it stood at one moment, and nobody who writes is held up."""
    if connection.in_atomic_block:
        yield
    elif on_sqlite():
        Book.load()  # a book that nobody has opened yet makes its settings, which nothing may do in here
        run("BEGIN")
        try:
            yield
        finally:
            run("ROLLBACK")
    else:
        Book.load()
        with transaction.atomic():
            run("SET TRANSACTION ISOLATION LEVEL REPEATABLE READ READ ONLY")
            yield


def write_folder(folder: Path, scope: Scope) -> dict[str, int]:
    counts = {}
    for name in ROWS:
        with (folder / f"{name}.csv").open("w", encoding="utf-8", newline="") as target:
            counts[name] = write_csv(target, name, scope)
    return counts


def write_zip(target: IO[bytes], scope: Scope) -> dict[str, int]:
    counts = {}
    with zipfile.ZipFile(target, "w", zipfile.ZIP_DEFLATED) as archive:
        for name in ROWS:
            entry = zipfile.ZipInfo(f"{name}.csv", FIRST_YEAR)
            entry.compress_type = zipfile.ZIP_DEFLATED
            with archive.open(entry, "w", force_zip64=True) as stream:
                text = io.TextIOWrapper(stream, encoding="utf-8", newline="")
                counts[name] = write_csv(text, name, scope)
                text.flush()
                text.detach()
    return counts


def write_csv(target: Any, name: str, scope: Scope) -> int:
    writer = csv.writer(target, lineterminator="\n")
    writer.writerow(header(name))
    count = 0
    for row in ROWS[name](scope):
        count += 1
        writer.writerow([csv_cell(value) for value in row])
    return count


def header(name: str) -> list[str]:
    kind = next(kind for kind in ALL_KINDS if kind.name == name)
    return [column.name for column in kind.columns]


def cell(value: Any) -> str:
    if value is None:
        return ""
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, float):
        return repr(value)
    return value.isoformat() if isinstance(value, dt.date) else str(value)


def csv_cell(value: Any) -> str:
    """A text that a spreadsheet would run as a formula is quoted; the quote is taken off when the file comes in."""
    return f"'{value}" if isinstance(value, str) and is_formula(value.lstrip("'")) else cell(value)


def write_workbook(target: IO[bytes], scope: Scope) -> dict[str, int]:
    import xlsxwriter

    options = {
        "constant_memory": True,
        "strings_to_formulas": False,
        "strings_to_urls": False,
        "strings_to_numbers": False,
    }
    counts = {}
    with xlsxwriter.Workbook(target, options) as workbook:
        for name in ROWS:
            sheet = workbook.add_worksheet(name)
            for place, title in enumerate(header(name)):
                sheet.write_string(0, place, title)
            counts[name] = 0
            for number, row in enumerate(ROWS[name](scope), start=1):
                if number >= MOST_SHEET_ROWS:
                    raise Unreadable(
                        f"has more than {MOST_SHEET_ROWS - 1} rows, too many for a sheet. Choose .zip.", file=name
                    )
                counts[name] = number
                for place, value in enumerate(row):
                    write_cell(sheet, number, place, value)
    return counts


def write_cell(sheet: Any, row: int, place: int, value: Any) -> None:
    if value is None or value == "":
        return
    exact = isinstance(value, int | float | Decimal) and not isinstance(value, bool) and kept_exactly(value)
    if exact:
        sheet.write_number(row, place, value)
    else:
        sheet.write_string(row, place, cell(value))


def kept_exactly(value: float | Decimal) -> bool:
    return float(f"{value:.{EXACT_DIGITS}G}") == value
