"""Counters and hour meters: the face of one counter never falls; a late reading fits between its neighbours."""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from itertools import groupby
from zoneinfo import ZoneInfo

from django.db.models import Q

from fleet.actions.entries import CounterEntry
from fleet.actions.errors import BadValue, CounterWentBack, day_words, thousands
from fleet.clock_counts import Face, accumulate
from fleet.models import Module, Reading, Restart

UNITS = ("strokes", "hours")
FACES = {"strokes": "Counter", "hours": "Hour meter"}
SAYS_COUNTER = Q(strokes__isnull=False) | Q(hours__isnull=False)


@dataclass(frozen=True, slots=True)
class Shown:
    """What one reading says in one unit."""

    pk: int | None
    read_at: dt.datetime
    value: float
    counter: str
    restarts: str

    def continues(self, running: str) -> bool:
        """A reading without a serial is of the counter that was running."""
        return not self.restarts and self.counter in {"", running}


def shown_by(module: Module, unit: str) -> list[Shown]:
    """Standing readings of a unit, in the order they were taken."""
    rows = Reading.objects.standing().filter(module=module, **{f"{unit}__isnull": False}).order_by("read_at", "id")
    columns = ("pk", "read_at", unit, "counter", "restarts")
    return in_order([Shown(*row) for row in rows.values_list(*columns)])


def in_order(rows: Sequence[Shown]) -> list[Shown]:
    """At a change of counters both are read at one moment, the old one's last face first."""
    ordered: list[Shown] = []
    running = ""
    for _, group in groupby(sorted(rows, key=lambda row: row.read_at), key=lambda row: row.read_at):
        now = running
        ordered += sorted(group, key=lambda row: row.counter not in {"", now})
        running = running_after(ordered)
    return ordered


def running_after(rows: Sequence[Shown]) -> str:
    """The serial of the counter that runs after the last of these readings."""
    return next((row.counter for row in reversed(rows) if row.counter), "")


def split_faces(module: Module, read_at: dt.datetime, entry: CounterEntry) -> list[CounterEntry]:
    """Strokes and hours read at once, of which only one began again: told apart, so that the other goes on counting.

    The face that fell is the one that began again; if neither fell, it is the counter of strokes.
    """
    if entry.strokes is None or entry.hours is None or not (entry.restarts or entry.counter):
        return [entry]
    before = {unit: [row for row in shown_by(module, unit) if row.read_at <= read_at] for unit in UNITS}
    if not any(before.values()):
        return [entry]
    fell = {unit: bool(rows) and getattr(entry, unit) < rows[-1].value for unit, rows in before.items()}
    again = {
        "strokes": bool(before["strokes"]) and (fell["strokes"] or not fell["hours"]),
        "hours": bool(before["hours"]) and (fell["hours"] or not before["strokes"]),
    }
    begins = {
        unit: bool(entry.restarts) or (bool(rows) and entry.counter not in {"", running_after(rows)})
        for unit, rows in before.items()
    }
    goes_on = [unit for unit in UNITS if begins[unit] and not again[unit]]
    if not goes_on:
        return [entry]
    said = {"counter": entry.counter, "restarts": entry.restarts}
    return [
        CounterEntry(**{unit: getattr(entry, unit)}, **({} if unit in goes_on else said))  # type: ignore[arg-type]
        for unit in UNITS
    ]


@dataclass(frozen=True, slots=True)
class Checked:
    """What a new reading adds up to, and whether it is the last of its counter."""

    totals: dict[str, float]
    last: bool


def check_counter(reading: Reading, zone: ZoneInfo) -> Checked:
    """Names the counter where the entry did not, and refuses a face that does not fit its neighbours."""
    lines = {unit: shown_by(reading.module, unit) for unit in UNITS if getattr(reading, unit) is not None}
    if not reading.counter:
        names = {running_after([row for row in rows if row.read_at <= reading.read_at]) for rows in lines.values()}
        reading.counter = names.pop() if len(names) == 1 else ""
    totals: dict[str, float] = {}
    last = True
    for unit, rows in lines.items():
        own = Shown(None, reading.read_at, getattr(reading, unit), reading.counter, reading.restarts)
        ordered = in_order([*rows, own])
        check_line(ordered, own, unit, zone)
        totals[unit] = totals_of(ordered)[None]
        last = last and ordered[-1] is own
    return Checked(totals, last)


def check_line(rows: list[Shown], own: Shown, unit: str, zone: ZoneInfo) -> None:
    place = rows.index(own)
    before = rows[place - 1] if place else None
    after = rows[place + 1] if place + 1 < len(rows) else None
    running = running_after(rows[:place])
    check_restart(own, before, running)
    if before is not None and own.continues(running) and own.value < before.value:
        raise CounterWentBack(last=before.value, given=own.value, read_on=local_day(before, zone), unit=unit)
    if after is None:
        return
    follows = after.continues(own.counter or running)
    if before is not None and after.continues(running) and not follows:
        raise BadValue(
            f"{FACES[unit]} {own.counter} would lie between two readings of {running or 'another one'} "
            f"({day_words(local_day(before, zone))} and {day_words(local_day(after, zone))}). Check serial and day.",
            field="counter",
        )
    if follows and after.value < own.value:
        raise BadValue(
            f"{FACES[unit]} {thousands(own.value)} is above the later reading {thousands(after.value)} "
            f"of {day_words(local_day(after, zone))}. Check the number and the day.",
            field=unit,
        )


def check_restart(own: Shown, before: Shown | None, running: str) -> None:
    if own.restarts != Restart.ROLLED_OVER:
        return
    if before is None:
        raise BadValue(
            "No earlier reading is on record, so nothing can have rolled over. Leave that empty.", field="restarts"
        )
    if own.counter not in {"", running}:
        raise BadValue(
            "A new counter has not rolled over. Enter the new serial or the roll-over, not both.", field="restarts"
        )


def check_without(reading: Reading, zone: ZoneInfo) -> None:
    """Refuses to take a reading away where those after it would then fall."""
    for unit in UNITS:
        if getattr(reading, unit) is not None:
            check_rows([row for row in shown_by(reading.module, unit) if row.pk != reading.pk], zone)


def check_rows(rows: Iterable[Shown], zone: ZoneInfo) -> None:
    before: Shown | None = None
    running = ""
    for row in rows:
        if before is not None and row.continues(running) and row.value < before.value:
            raise BadValue(
                f"Without it the reading {thousands(row.value)} of {day_words(local_day(row, zone))} would lie below "
                f"{thousands(before.value)} of {day_words(local_day(before, zone))}. "
                "Enter the right reading first, then strike this one out.",
                field="record",
            )
        before, running = row, row.counter or running


def local_day(row: Shown, zone: ZoneInfo) -> dt.date:
    return row.read_at.astimezone(zone).date()


def accumulated(module: Module, unit: str) -> dict[int, float]:
    """The count accumulated since the module's first counter began, by reading."""
    return {pk: total for pk, total in totals_of(shown_by(module, unit)).items() if pk is not None}


def totals_of(rows: Sequence[Shown]) -> dict[int | None, float]:
    faces = [Face(row.read_at.timestamp(), float(row.value), row.counter, row.restarts) for row in rows]
    return {row.pk: anchor.total for row, anchor in zip(rows, accumulate(faces), strict=True)}
