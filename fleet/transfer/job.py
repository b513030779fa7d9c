"""What the steps of one import share."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

from fleet.models import Person
from fleet.transfer.columns import FileKind
from fleet.transfer.known import Known
from fleet.transfer.problems import Problems
from fleet.work import Progress


@dataclass
class FileReport:
    """What became of one file."""

    file: str
    rows: int = 0
    added: int = 0
    passed_over: int = 0
    updated: int = 0
    made: int = 0  # visits that no file names

    def as_dict(self) -> dict[str, Any]:
        plain = {"file": self.file, "rows": self.rows, "added": self.added, "passed_over": self.passed_over}
        return plain | {"updated": self.updated} | ({"made": self.made} if self.made else {})


@dataclass
class Job:
    """One pass over the files."""

    known: Known
    problems: Problems
    progress: Progress
    person: Person | None
    update: bool
    reports: dict[str, FileReport] = field(default_factory=dict)
    present: dict[str, list[str]] = field(default_factory=dict)  # staged columns that each file really has
    kinds: list[FileKind] = field(default_factory=list)  # staged, in their order
    rows_done: int = 0
    rows_total: int = 0
    message: str = ""
    changed_orders: dict[int, tuple[Any, Any]] = field(default_factory=dict)  # supplier and day of orders of the book

    def say(self, kind: FileKind, row: int, column: str, value: Any, message: str) -> None:
        self.problems.add(self.reports[kind.name].file, row, column, value, message)

    def step(self, rows: int, message: str) -> None:
        self.rows_done += rows
        self.message = message
        self.progress.step(self.rows_done, max(self.rows_total, self.rows_done), message)
