"""What a module's clocks say now, and how old its parts are, read from the derived rows."""

from __future__ import annotations

from bisect import bisect_right
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from fleet.formats import rounded
from fleet.models import ClockPoint, Fitting, FittingClock, Module
from fleet.module_past import Window, in_sight

COLUMNS = ("day", "days", "hours", "strokes", "strokes_read", "hours_read")


@dataclass(frozen=True)
class Age:
    """A part's age on its component's clock; `measured` False where duty, not a counter, tells the last stretch."""

    value: float | None
    clock: str
    measured: bool
    at_least: bool = False

    @property
    def shown(self) -> float | None:
        """To three figures where duty tells a part of it: more would not be known."""
        return self.value if self.measured or self.value is None else rounded(self.value)


class ModuleClock:
    def __init__(self, module: Module, now: float) -> None:
        self.now = now
        self.points: Sequence[tuple[Any, ...]] = list(
            ClockPoint.objects.filter(module=module).order_by("day").values_list(*COLUMNS)
        )

    def at(self, clock: str, day: float) -> float | None:
        """Straight between two knots; the last one lies in the far future."""
        column = COLUMNS.index(clock)
        place = bisect_right(self.points, day, key=lambda point: point[0])
        if place == 0:
            return None
        before = self.points[place - 1]
        if place == len(self.points) or before[column] is None:
            return before[column]
        after = self.points[place]
        if after[column] is None:
            return before[column]
        share = (day - before[0]) / (after[0] - before[0])
        return before[column] + share * (after[column] - before[column])

    def pace(self, clock: str) -> float | None:
        """Use a day from now on, at the recent duty; None where it is not known or the clock stands."""
        now, later = self.at(clock, self.now), self.at(clock, self.now + 1)
        return None if now is None or later is None or later <= now else later - now

    def read_last(self, clock: str) -> float | None:
        """The day on which the counter or meter was read last."""
        if clock == "days":
            return self.now
        column = COLUMNS.index(f"{clock}_read")
        return max((point[0] for point in self.points if point[column]), default=None)

    def age_of(self, fitting: Fitting, told: FittingClock | None) -> Age:
        """From new: what was on it when it went in, and what the module's clock ran since."""
        clock = fitting.position.component.clock
        end = self.at(clock, self.now) if fitting.removed_on is None else value_of(told, clock, "end")
        begun = value_of(told, clock, "fit")
        at_least = begun is None
        if at_least:
            begun = value_of(told, clock, "records")
        if begun is None or end is None:
            return Age(None, clock, False)
        return Age(max(end - begun, 0.0) + fitting.age_at_fit, clock, self.measured(fitting, told, clock), at_least)

    def measured(self, fitting: Fitting, told: FittingClock | None, clock: str) -> bool:
        """Whether both ends were counted; a running part's when the counter was read today."""
        if clock == "days":
            return True
        if fitting.removed_on is not None:
            return bool(told and getattr(told, f"{clock}_measured"))
        read = self.read_last(clock)
        return read is not None and self.now - read < 1

    def curve(self, clock: str, windows: list[Window] | None) -> list[list[tuple[float, float]]]:
        """The accumulated count by day, up to now, in stretches that may be seen."""
        column = COLUMNS.index(clock)
        days = [(point[0], point[column]) for point in self.points if point[0] < self.now]
        value = self.at(clock, self.now)
        if value is not None:
            days.append((self.now, value))
        stretches: list[list[tuple[float, float]]] = [[]]
        for day, count in days:
            if count is not None and in_sight(day, windows):
                stretches[-1].append((day, count))
            elif stretches[-1]:
                stretches.append([])
        return [stretch for stretch in stretches if stretch]


def value_of(told: FittingClock | None, clock: str, end: str) -> float | None:
    return getattr(told, f"{clock}_at_{end}") if told else None
