"""Typed refusals of the actions. Each says state, value, remedy; forms and the API show the same sentence."""

from __future__ import annotations

import datetime as dt
from typing import Any

from fleet import formats


def thousands(number: float) -> str:
    return formats.number(number, 0)


def day_words(day: dt.date) -> str:
    return formats.long_day(day)


class RecordError(Exception):
    """An entry that cannot be recorded; `field` names the field it belongs to, where there is one."""

    def __init__(self, message: str, *, field: str = "", **data: Any) -> None:
        super().__init__(message)
        self.message, self.field, self.data = message, field, data


class NotAllowed(RecordError):
    """The person does not hold the right, or not at this site."""


class NotFound(RecordError):
    """Something named does not exist, or not for this person."""


class BadValue(RecordError):
    """A value that is out of range, in the future, or in the wrong order."""


class CounterWentBack(RecordError):
    """A reading below the last one on the same counter."""

    def __init__(self, *, last: float, given: float, read_on: dt.date, unit: str = "strokes") -> None:
        face = "Counter" if unit == "strokes" else "Hour meter"
        super().__init__(
            f"{face} {thousands(given)} is below the last reading {thousands(last)} of {day_words(read_on)}. "
            "Was the counter changed?",
            field=unit,
            last=last,
            given=given,
            read_on=read_on,
        )


class PositionTaken(RecordError):
    """A second part for a position, or a stay that overlaps another."""


class NothingFitted(RecordError):
    """A removal from a position that holds no part on that day."""


class ModuleElsewhere(RecordError):
    """A module in two places at a time."""


class AlreadyDone(RecordError):
    """Struck out, settled or ended before."""


class Collided(RecordError):
    """The database refused what no check had seen coming, or was busy for too long: nothing was recorded."""


class ChangedSince(RecordError):
    """Somebody changed the record after it was opened; `changes` lists (field, words, before, now, who, when)."""

    def __init__(self, *, record: str, changes: list[dict[str, Any]]) -> None:
        told = "; ".join(f"{c['words']}: {c['before']} → {c['now']}" for c in changes) or "see its history"
        who = changes[0]["who"] if changes else "somebody"
        super().__init__(
            f"{who} changed {record} since you opened it ({told}). Look at it again, then save your change.",
            changes=changes,
        )
