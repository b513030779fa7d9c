"""What is wrong with the files: every error with file, row, column, value and remedy."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import asdict, dataclass
from typing import Any

MOST_LISTED = 1000


@dataclass(frozen=True)
class Problem:
    """`row` as a spreadsheet counts it: the header is row 1; 0 where the whole file is meant."""

    file: str
    row: int
    column: str
    value: str
    message: str

    def __str__(self) -> str:
        place = ", ".join(part for part in (self.file, f"row {self.row}" if self.row else "", self.column) if part)
        shown = f" “{self.value}”" if self.value else ""
        return f"{place}{shown}: {self.message}"


def shown(value: Any) -> str:
    """A value as a message quotes it: short, without characters that cannot be seen."""
    text = "" if value is None else str(value)
    text = "".join(each if each.isprintable() else "�" for each in text)
    return text if len(text) <= 60 else text[:60] + "…"


class Problems:
    """Counts all, lists the first thousand."""

    def __init__(self) -> None:
        self.count = 0
        self.listed: list[Problem] = []

    def add(self, file: str, row: int, column: str, value: Any, message: str) -> None:
        self.count += 1
        if len(self.listed) < MOST_LISTED:
            self.listed.append(Problem(file, row, column, shown(value), message))

    def __bool__(self) -> bool:
        return self.count > 0

    def __iter__(self) -> Iterator[Problem]:
        return iter(self.listed)

    def as_dicts(self) -> list[dict[str, Any]]:
        return [asdict(problem) for problem in self.listed]


class Unreadable(Exception):
    """A file that cannot be read at all; nothing after it makes sense."""

    def __init__(self, message: str, *, file: str = "", row: int = 0) -> None:
        super().__init__(message)
        self.message, self.file, self.row = message, file, row
