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


class ChangedMeanwhile(RecordError):
    """Somebody changed the part of a position after the sheet was opened; sent again it is about the part now in it."""

    def __init__(self, *, position: str, who: str, day: str, now: str, holds: int) -> None:
        super().__init__(
            f"{who} logged a change here{day}, after you opened this sheet: {now}. If yours is the same "
            "change, open the sheet again and log only what is missing. If it is another one, send this once more.",
            field="reason",
            position=position,
            shown_now={"holds": holds},
        )


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


class NotEnough(RecordError):
    """A store holds fewer than are to leave it."""

    def __init__(self, *, store: str, part: str, on_hand: int, asked: int, used: bool = False) -> None:
        kind = f"used {part}" if used else part
        held = "none" if on_hand <= 0 else thousands(on_hand)
        super().__init__(
            f"{store} holds {held} of {kind} on record, and {thousands(asked)} should leave it. "
            "Take fewer, choose another store, or count the shelf.",
            field="quantity",
            on_hand=on_hand,
            asked=asked,
        )


class OrderedMeanwhile(RecordError):
    """Somebody ordered the same part after the page was opened; sent again it is ordered besides."""

    def __init__(self, *, who: str, quantity: int, part: str, order: str, newest: int) -> None:
        super().__init__(
            f"{who} ordered {thousands(quantity)} of {part} since you opened this page (order {order}). "
            "Nothing of yours is ordered yet. Send it once more only if it is needed besides.",
            shown_now={"newest": newest},
        )


class ChangedCount(RecordError):
    """Stock moved between the moment somebody began to count and the moment they said the number."""

    def __init__(self, *, part: str, expected: int, on_hand: int) -> None:
        super().__init__(
            f"When you began to count, {thousands(expected)} of {part} were on record; now {thousands(on_hand)} are. "
            "Somebody moved some meanwhile. Look at the shelf again and send the number once more.",
            field="counted",
            expected=expected,
            on_hand=on_hand,
        )
