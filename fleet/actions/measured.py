"""Accumulated strokes and hours at a fitting's start and end: only what was measured."""

from __future__ import annotations

from collections.abc import Mapping
from typing import NamedTuple

from django.db.models import Q

from fleet.actions.checks_counters import SAYS_COUNTER, UNITS, accumulated
from fleet.actions.writes import save_again
from fleet.models import Fitting, Module, Reading, Visit


class Measured(NamedTuple):
    strokes: int | None = None
    hours: float | None = None


def measured_of(totals: Mapping[str, float | None]) -> Measured:
    strokes = totals.get("strokes")
    return Measured(None if strokes is None else round(strokes), totals.get("hours"))


def measured_in(visit: Visit | None, strokes: int | None, hours: float | None) -> Measured:
    """What was said, else what the counter of the visit says."""
    if visit is None or (strokes is not None and hours is not None):
        return Measured(strokes, hours)
    read = measured_by_visit(visit.module, {visit.pk}).get(visit.pk, Measured())
    return Measured(read.strokes if strokes is None else strokes, read.hours if hours is None else hours)


class Counts:
    """The accumulated counts of one module's readings, worked out when first asked for."""

    def __init__(self, module: Module) -> None:
        self.module = module
        self.by_unit: dict[str, dict[int, float]] = {}

    def of(self, unit: str, reading: Reading) -> float | None:
        if getattr(reading, unit) is None:
            return None
        if unit not in self.by_unit:
            self.by_unit[unit] = accumulated(self.module, unit)
        return self.by_unit[unit].get(reading.pk)


def measured_by_visit(module: Module, visits: set[int]) -> dict[int, Measured]:
    """What the last standing readings of strokes and of hours at each visit add up to."""
    counts = Counts(module)
    said: dict[int, dict[str, float | None]] = {}
    for reading in Reading.objects.standing().filter(SAYS_COUNTER, visit__in=visits).order_by("id"):
        assert reading.visit_id is not None
        totals = {unit: counts.of(unit, reading) for unit in UNITS if getattr(reading, unit) is not None}
        said.setdefault(reading.visit_id, {}).update(totals)
    return {visit: measured_of(totals) for visit, totals in said.items()}


class MeasuredEnds:
    """Made before a reading comes late or is struck out; `follow` moves the ends that were measured from then on.

    An end that somebody entered by hand, and that no reading ever said, stays as it is.
    """

    def __init__(self, reading: Reading) -> None:
        self.module = reading.module
        later = Reading.objects.standing().filter(
            SAYS_COUNTER, module=self.module, read_at__gte=reading.read_at, visit__isnull=False
        )
        self.visits: set[int] = set(later.values_list("visit_id", flat=True))
        if reading.visit_id is not None:
            self.visits.add(reading.visit_id)
        self.before = measured_by_visit(self.module, self.visits) if self.visits else {}

    def follow(self) -> None:
        if not self.visits:
            return
        now = measured_by_visit(self.module, self.visits)
        if now == self.before:
            return
        belongs = Q(fitted_visit__in=self.visits) | Q(removed_visit__in=self.visits)
        for fitting in Fitting.objects.standing().filter(belongs, module=self.module):
            self._move(fitting, now)

    def _move(self, fitting: Fitting, now: dict[int, Measured]) -> None:
        changed: set[str] = set()
        for end, visit in (("fit", fitting.fitted_visit_id), ("removal", fitting.removed_visit_id)):
            if visit not in self.visits:
                continue
            was, is_now = self.before.get(visit, Measured()), now.get(visit, Measured())
            for unit in UNITS:
                column = f"{unit}_at_{end}"
                stored, wanted = getattr(fitting, column), getattr(is_now, unit)
                if stored in {None, getattr(was, unit)} and stored != wanted:
                    setattr(fitting, column, wanted)
                    changed.add(column)
        if changed:
            save_again(fitting, changed)
