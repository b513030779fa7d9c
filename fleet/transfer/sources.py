"""Records files as they come: a folder or ZIP of CSV, or one XLSX workbook. Nothing is trusted, all is bounded."""

from __future__ import annotations

import csv
import io
import zipfile
from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass
from functools import partial
from pathlib import Path
from typing import Any

from fleet.transfer.problems import Unreadable

MOST_BYTES = 1024**3  # all files together, unpacked
MOST_ENTRIES = 200
MOST_ROWS = 3_000_000
MOST_COLUMNS = 100
LONGEST_CELL = 20_000
NOT_UTF8 = "is not UTF-8 text. Save it as “CSV UTF-8” and choose it again."
HOLDS_NOTHING = "No records file is in it. Name the files as the format does: modules.csv, fittings.csv …"


@dataclass(frozen=True)
class Table:
    """One file or sheet: `rows` yields (row number as a spreadsheet counts, cells), the header first."""

    file: str  # as it is called in messages
    name: str  # its name without folder and ending, in lower case
    rows: Callable[[], Iterator[tuple[int, list[str]]]]


def open_source(path: Path) -> list[Table]:
    """The tables of a folder, .zip, .xlsx or a single .csv."""
    if path.is_dir():
        files = sorted(child for child in path.iterdir() if child.suffix.lower() == ".csv" and child.is_file())
        bound_size(sum(child.stat().st_size for child in files), path.name)
        return not_empty([csv_table(child.name, partial(child.open, "rb")) for child in files], path.name)
    if not path.is_file():
        raise Unreadable("does not exist. Check the path.", file=str(path))
    return open_bytes(path.name, path.read_bytes() if path.stat().st_size <= MOST_BYTES else None)


def open_bytes(name: str, content: bytes | None) -> list[Table]:
    """The tables of one file that was handed in."""
    if content is None:
        raise Unreadable(f"is larger than {MOST_BYTES // 1024**2} MB. Split it.", file=name)
    ending = name.rpartition(".")[2].lower()
    if ending == "csv":
        return [csv_table(name, partial(io.BytesIO, content))]
    if ending == "zip":
        return open_zip(name, content)
    if ending == "xlsx":
        from fleet.transfer.sources_xlsx import open_workbook

        return not_empty(open_workbook(name, content), name)
    raise Unreadable("is no records file. Give a folder or .zip of CSV files, or one .xlsx workbook.", file=name)


def not_empty(tables: list[Table], name: str) -> list[Table]:
    if not tables:
        raise Unreadable(HOLDS_NOTHING, file=name)
    seen: set[str] = set()
    for table in tables:
        if table.name in seen:
            raise Unreadable(f"holds {table.name} twice. Keep one of them.", file=name)
        seen.add(table.name)
    return tables


def bound_size(size: int, name: str) -> None:
    if size > MOST_BYTES:
        raise Unreadable(f"unpacks to more than {MOST_BYTES // 1024**2} MB. Split it.", file=name)


def open_archive(name: str, content: bytes) -> zipfile.ZipFile:
    """An archive whose every entry was unpacked once to count its real bytes: what it declares is not believed."""
    try:
        archive = zipfile.ZipFile(io.BytesIO(content))
        entries = archive.infolist()
        if len(entries) > MOST_ENTRIES:
            raise Unreadable(f"holds {len(entries)} files, more than {MOST_ENTRIES}. Pack only the records.", file=name)
        total = 0
        for entry in entries:
            if entry.flag_bits & 1:
                raise Unreadable("is locked with a password. Pack it without one.", file=name)
            with archive.open(entry) as unpacked:
                while piece := unpacked.read(1 << 20):
                    total += len(piece)
                    bound_size(total, name)
    except (zipfile.BadZipFile, NotImplementedError, EOFError, OSError, ValueError) as fault:
        raise Unreadable(f"is damaged ({fault}). Make it again.", file=name) from None
    except Exception as fault:  # the unpackers raise errors of their own for damaged data
        if isinstance(fault, Unreadable):
            raise
        raise Unreadable("is damaged. Make it again.", file=name) from None
    return archive


def open_zip(name: str, content: bytes) -> list[Table]:
    archive = open_archive(name, content)
    tables = []
    for entry in archive.infolist():
        base = entry.filename.rpartition("/")[2]
        if entry.is_dir() or base.startswith(".") or "__MACOSX" in entry.filename or not base.lower().endswith(".csv"):
            continue
        tables.append(csv_table(base, partial(archive.open, entry)))
    return not_empty(tables, name)


def csv_table(file: str, opened: Callable[[], Any]) -> Table:
    def rows() -> Iterator[tuple[int, list[str]]]:
        return csv_rows(file, io.TextIOWrapper(opened(), encoding="utf-8-sig", errors="strict", newline=""))

    return Table(file, file.rpartition(".")[0].lower(), rows)


def csv_rows(file: str, text: io.TextIOWrapper) -> Iterator[tuple[int, list[str]]]:
    csv.field_size_limit(LONGEST_CELL)
    number = 0
    with text:
        try:
            first = text.readline(1 << 16)
            separator = ";" if first.count(";") > first.count(",") else ","
            for number, cells in enumerate(csv.reader(lines(first, text), delimiter=separator, strict=True), start=1):
                if number > MOST_ROWS:
                    raise Unreadable(f"has more than {MOST_ROWS} rows. Split it.", file=file)
                yield number, [unquoted(cell.strip()) for cell in cells]
        except UnicodeDecodeError:
            raise Unreadable(NOT_UTF8, file=file, row=number + 1 if number else 0) from None
        except csv.Error as fault:
            raise Unreadable(csv_words(str(fault)), file=file, row=number + 1) from None


def is_formula(text: str) -> bool:
    return text.startswith(("=", "+", "-", "@"))


def unquoted(cell: str) -> str:
    """Without the quotation mark that keeps a spreadsheet from running a text as a formula."""
    return cell[1:] if cell.startswith("'") and is_formula(cell.lstrip("'")) else cell


def lines(first: str, rest: Iterable[str]) -> Iterator[str]:
    if first:
        yield first
    yield from rest


def csv_words(fault: str) -> str:
    if "field larger" in fault:
        return f"holds a cell of more than {LONGEST_CELL} characters. A quotation mark may be missing."
    if "unexpected end" in fault:
        return "ends inside a quotation. A quotation mark is missing."
    return f"is no well-formed CSV ({fault}). Check the quotation marks."
