"""One row on its way from the file to the staging table."""

from __future__ import annotations

import datetime as dt
from collections.abc import Callable
from typing import Any

from fleet.actions.checks_values import latest_planned_day

Say = Callable[[int, str, Any, str], None]


class Row:
    """Values by staged column; `say` reports a problem of one of the file's columns."""

    __slots__ = ("_say", "bad", "given", "number", "values")

    def __init__(self, number: int, values: dict[str, Any], given: dict[str, str], say: Say, bad: bool) -> None:
        self.number, self.values, self.given, self._say, self.bad = number, values, given, say, bad

    def __getitem__(self, name: str) -> Any:
        return self.values[name]

    def __setitem__(self, name: str, value: Any) -> None:
        self.values[name] = value

    def get(self, name: str) -> Any:
        return self.values.get(name)

    def say(self, column: str, message: str) -> None:
        self.bad = True
        self._say(self.number, column, self.given.get(column, ""), message)

    def not_before(self, column: str, to: str, first: dt.date | None, words: str) -> None:
        """Refuses a day before another one."""
        value = self.values.get(to)
        if value is not None and first is not None and value < first:
            self.say(column, f"lies before {words}, {first.isoformat()}. Enter a day from then on.")

    def not_after(self, column: str, to: str, last: dt.date | None, words: str) -> None:
        value = self.values.get(to)
        if value is not None and last is not None and value > last:
            self.say(column, f"lies after {words}, {last.isoformat()}. Enter a day up to then.")

    def not_too_far(self, column: str) -> None:
        """Refuses a planned day that only a year typed wrong can mean."""
        day = self.values.get(column)
        if day is not None and day > latest_planned_day():
            self.say(column, "lies more than ten years ahead. Check the year.")
