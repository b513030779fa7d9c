"""From the faces of counters to accumulated counts, and from counts to a count at any moment. Pure functions."""

from __future__ import annotations

from bisect import bisect_right
from collections.abc import Callable, Sequence
from itertools import groupby
from typing import NamedTuple

RECENT_DAYS = 90.0  # the recent duty is taken over the last readings that span this many service days
SHORTEST_SPAN = 7.0  # readings closer together than this many service days say nothing about duty

ServiceDays = Callable[[float], float]


class Face(NamedTuple):
    """What the face of one counter showed; `day` is an ordinal day with its fraction."""

    day: float
    value: float
    counter: str = ""
    restarts: str = ""


class Anchor(NamedTuple):
    """An accumulated count that was measured; `advanced` where it is more than the measured count before it."""

    day: float
    total: float
    advanced: bool = False


class Stretch(NamedTuple):
    """A stay in service with the duty its site is said to have, or without."""

    from_day: float
    to_day: float
    duty: float | None


def accumulate(faces: Sequence[Face]) -> list[Anchor]:
    """Faces in the order they were read become accumulated counts that never fall.

    The first counter starts with its face. A counter with another serial starts at its first face: what ran between
    the last face of the old and the first of the new is not counted. A reset counter counts from 0; one that rolled
    over went on to the next power of ten above its last face; one that shows no less than before did not (it is the
    other face of a reading that did). A reading without a serial is the same counter still.
    """
    anchors: list[Anchor] = []
    total, last, counter = 0.0, 0.0, ""
    for face in _old_counter_first(faces):
        before = total
        if not anchors:
            total = face.value
        elif face.restarts == "rolled over" and face.value < last:
            total += _next_power_of_ten(last) - last + face.value
        elif face.restarts == "reset":
            total += face.value
        elif face.counter in {"", counter}:
            total += max(0.0, face.value - last)
        last, counter = face.value, face.counter or counter
        anchors.append(Anchor(face.day, total, bool(anchors) and total > before))
    return anchors


def _old_counter_first(faces: Sequence[Face]) -> list[Face]:
    """At a change of counters both are read at one moment, the old one's last face first."""
    ordered: list[Face] = []
    counter = ""
    for _, group in groupby(faces, key=lambda face: face.day):
        same = sorted(group, key=lambda face: face.counter not in {"", counter})
        ordered.extend(same)
        counter = ordered[-1].counter or counter
    return ordered


def _next_power_of_ten(value: float) -> float:
    power = 10.0
    while power <= value:
        power *= 10.0
    return power


def with_fitting_counts(anchors: list[Anchor], counts: Sequence[tuple[float, float]]) -> list[Anchor]:
    """Adds the counts written down at a change of parts where they fit between the readings."""
    if not counts:
        return anchors
    days = [anchor.day for anchor in anchors]
    taken = set(days)
    added: list[tuple[float, float]] = []
    for day, total in sorted(set(counts)):
        place = bisect_right(days, day)
        not_below = max(anchors[place - 1].total if place else 0.0, added[-1][1] if added else 0.0)
        not_above = anchors[place].total if place < len(anchors) else total
        if day not in taken and not_below <= total <= not_above:
            taken.add(day)
            added.append((day, total))
    if not added:
        return anchors
    merged = sorted([*((anchor.day, anchor.total) for anchor in anchors), *added])
    return [Anchor(day, total, place > 0 and total > merged[place - 1][1]) for place, (day, total) in enumerate(merged)]


class CountClock:
    """One module's accumulated count at any moment: straight between anchors over service time."""

    def __init__(self, anchors: list[Anchor], stretches: Sequence[Stretch], service: ServiceDays, start: float) -> None:
        self.service = service
        self.stretches = stretches
        self.measured = bool(anchors)
        self.first = anchors[0].day if anchors else None
        self.last = anchors[-1].day if anchors else None
        self.duty = self._recent_duty(anchors)
        self.anchors = self._from_start(anchors, start)
        self.days = [anchor.day for anchor in self.anchors]
        self.served = [service(day) for day in self.days]
        self.known = self.measured or (
            bool(stretches) and all(part.duty is not None for part in stretches if self._served(part))
        )

    def at(self, day: float, served: float | None = None) -> float | None:
        """The count at a moment; `served` are the service days by then, where the caller knows them."""
        if not self.known:
            return None
        if not self.measured:
            return sum(self._served(part, day) * (part.duty or 0.0) for part in self.stretches)
        place = bisect_right(self.days, day)
        if place == 0:
            return self.anchors[0].total
        before = self.anchors[place - 1]
        ran = (self.service(day) if served is None else served) - self.served[place - 1]
        if place == len(self.anchors):
            return before.total + (self.duty or 0.0) * ran
        after = self.anchors[place]
        whole = self.served[place] - self.served[place - 1]
        # counts that rose while the module was out of service are spread over the calendar
        share = ran / whole if whole > 0 else (day - before.day) / (after.day - before.day)
        return before.total + (after.total - before.total) * share

    def measured_at(self, day: float) -> bool:
        return self.first is not None and self.last is not None and self.first <= day <= self.last

    def _served(self, part: Stretch, until: float | None = None) -> float:
        end = part.to_day if until is None else min(part.to_day, until)
        return max(0.0, self.service(end) - self.service(part.from_day))

    def _recent_duty(self, anchors: list[Anchor]) -> float | None:
        site = self.stretches[-1].duty if self.stretches else None
        if len(anchors) < 2:
            return site
        last = anchors[-1]
        now = self.service(last.day)
        base = anchors[0]
        for anchor in reversed(anchors[:-1]):
            if now - self.service(anchor.day) >= RECENT_DAYS:
                base = anchor
                break
        span = now - self.service(base.day)
        if span >= SHORTEST_SPAN:
            return (last.total - base.total) / span
        return site

    def _from_start(self, anchors: list[Anchor], start: float) -> list[Anchor]:
        """Before the first reading the module ran at its early duty, or from 0 where no duty is known."""
        if not anchors or anchors[0].day <= start:
            return anchors
        first = anchors[0]
        ran = self.service(first.day) - self.service(start)
        duty = self._early_duty(anchors)
        total = max(0.0, first.total - duty * ran) if duty is not None else 0.0
        if duty is None and self.duty is None and ran >= SHORTEST_SPAN:
            self.duty = first.total / ran
        return [Anchor(start, total), *anchors]

    def _early_duty(self, anchors: list[Anchor]) -> float | None:
        first = anchors[0]
        for anchor in anchors[1:]:
            span = self.service(anchor.day) - self.service(first.day)
            if span >= RECENT_DAYS or (anchor is anchors[-1] and span >= SHORTEST_SPAN):
                return (anchor.total - first.total) / span
        return self.stretches[0].duty if self.stretches else None
