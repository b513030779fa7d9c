"""Reads one file into its staging table: header, cells, references, and what one row alone can get wrong."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import islice
from typing import Any

from fleet.transfer.cells import BadCell
from fleet.transfer.columns import Column, FileKind
from fleet.transfer.job import FileReport, Job
from fleet.transfer.problems import Unreadable
from fleet.transfer.row import Row, Say
from fleet.transfer.sources import LONGEST_CELL, Table
from fleet.transfer.staging import analyse, create_stage, fill

BATCH = 2000
UNKNOWN = {
    "person": "Add the person to people.csv, or correct the code.",
    "site": "Add the site to sites.csv, or correct the code.",
    "component": "Add it to components.csv, or correct the code.",
    "type": "Add it to types.csv, or correct the code.",
    "part": "Add it to parts.csv, or correct the code.",
    "module": "Add it to modules.csv, or correct the code.",
    "redesign": "Add the redesign to redesigns.csv, or correct the code.",
    "store": "Add the store to stores.csv, or correct the code.",
    "job": "Add the job to bench.csv, or correct the code.",
}
Header = list[Column | None]


def stage_file(kind: FileKind, table: Table, job: Job) -> None:
    """Leaves the staging table of the kind filled; problems go to the job."""
    create_stage(kind)
    report = job.reports[kind.name] = FileReport(table.file)
    job.kinds.append(kind)
    try:
        rows = table.rows()
        header = read_header(kind, next(rows, None), job)
        if header is None:
            return
        job.present[kind.name] = [column.compared_as for column in header if column is not None]
        while batch := list(islice(rows, BATCH)):
            fill(kind, list(staged_rows(kind, header, batch, job)))
            report.rows += len(batch)
            job.step(len(batch), f"Reading {table.file}")
    except Unreadable as fault:
        job.problems.add(fault.file or table.file, fault.row, "", "", fault.message)
    analyse(kind)


def read_header(kind: FileKind, first: tuple[int, list[str]] | None, job: Job) -> Header | None:
    """Which column stands where; None where the file cannot be read on."""
    names = [name.strip().lower() for name in first[1]] if first else []
    while names and not names[-1]:
        names.pop()
    if not names:
        job.say(kind, 1, "", "", f"has no header row. Its columns are: {column_list(kind)}.")
        return None
    by_name = {column.name: column for column in kind.columns}
    fine = True
    for place, name in enumerate(names):
        if name in names[:place]:
            job.say(kind, 1, name, "", "stands twice in the header. Keep one of them.")
            fine = False
        elif name not in by_name and name != "note":
            job.say(kind, 1, "", name, f"is no column of this file. Its columns are: {column_list(kind)}.")
    for column in kind.columns:
        if column.required and column.name not in names:
            job.say(kind, 1, column.name, "", "is missing in the header. Add the column.")
            fine = False
    return [by_name.get(name) for name in names] if fine else None


def column_list(kind: FileKind) -> str:
    return ", ".join(column.name for column in kind.columns)


def staged_rows(kind: FileKind, header: Header, batch: list[tuple[int, list[str]]], job: Job) -> Iterator[list[Any]]:
    def say(number: int, column: str, value: Any, message: str) -> None:
        job.say(kind, number, column, value, message)

    blank = {column.to: column.empty for column in kind.columns}
    needed = [column for column in kind.columns if column.required]
    rows = [read_row(header, number, cells, dict(blank), needed, job, say) for number, cells in batch if any(cells)]
    visit_columns = [column.to for column in kind.columns if column.name in {"visit", "fitted_visit", "removed_visit"}]
    referred = [name for name in visit_columns if name.endswith("_code")]
    if referred:
        job.known.load_visits({row.values[name] for row in rows for name in referred if row.values[name]})
    staged, finish, known = kind.staged, kind.finish, job.known
    for row in rows:
        finish(row, known)
        value_of = row.values.get
        yield [row.number, int(row.bad), -row.number, 0, *[value_of(name) for name in staged]]


def read_row(
    header: Header, number: int, cells: list[str], values: dict[str, Any], needed: list[Column], job: Job, say: Say
) -> Row:
    given: dict[str, str] = {}
    bad = False
    if len(cells) > len(header) and any(cells[len(header) :]):
        say(number, "", next(cell for cell in cells[len(header) :] if cell), "stands beyond the last column. Move it.")
        bad = True
    for column, text in zip(header, cells, strict=False):
        if column is None or not text:
            continue
        given[column.name] = text
        try:
            values[column.to] = cell_value(column, text, job)
        except BadCell as fault:
            say(number, column.name, text, str(fault))
            bad = True
    for column in needed:
        if column.name not in given:
            say(number, column.name, "", "is missing. Enter it.")
            bad = True
    return Row(number, values, given, say, bad)


def cell_value(column: Column, text: str, job: Job) -> Any:
    if "\x00" in text:
        raise BadCell("holds a NUL character, which no text has. Type it again.")
    if len(text) > LONGEST_CELL:
        raise BadCell(f"has more than {LONGEST_CELL} characters. Shorten it.")
    value = column.parse(text)
    if not column.refers:
        return value
    found = job.known.find(column.refers, value)
    if found is None:
        raise BadCell(f"is neither in the files nor in the book. {UNKNOWN[column.refers]}")
    return found
