"""A small fleet told in day numbers: day 0 is 1 January 2024, a module for each story unless one is named."""

from __future__ import annotations

import datetime as dt
from collections.abc import Sequence
from typing import Any

from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.models import (
    Component,
    FailureMode,
    Fitting,
    Module,
    ModuleType,
    Part,
    Placement,
    Position,
    Site,
    Stop,
    Visit,
)
from fleet.models import Reading as CounterReading
from reliability.fleet_lives import FleetLives
from reliability.lifetimes_from_fleet import lives

DAY_0 = dt.date(2024, 1, 1)
PLACED_LONG_BEFORE = -1000
Row = tuple[float, float, str, float | None, int]


def day(number: int) -> dt.date:
    return DAY_0 + dt.timedelta(days=number)


def instant(number: float) -> dt.datetime:
    """Day 3.5 is noon of day 3, in UTC as all sites here."""
    return dt.datetime(2024, 1, 1, tzinfo=dt.UTC) + dt.timedelta(days=number)


class SmallFleet:
    """One component with two parts and two modes; sites are made by name."""

    def __init__(self, clock: str = "days") -> None:
        self.component = Component.objects.create(code="NUT", name="Drive nut", clock=clock)
        self.type = ModuleType.objects.create(code="CARRIAGE")
        self.n1 = Part.objects.create(code="N1", component=self.component)
        self.n2 = Part.objects.create(code="N2", component=self.component)
        self.worn = FailureMode.objects.create(code="WORN", component=self.component)
        self.stripped = FailureMode.objects.create(code="STRIPPED", component=self.component)
        self.number = 0

    def site(self, code: str = "LOCK", **fields: Any) -> Site:
        """Reports every failure at once unless said otherwise."""
        fields.setdefault("reports_at_once", True)
        return Site.objects.create(code=code, zone="UTC", **fields)

    def module(self, tag: str, site: Site | None, placed: int = PLACED_LONG_BEFORE, **fields: Any) -> Module:
        module = Module.objects.create(code=tag, type=self.type, **fields)
        if site is not None:
            Placement.objects.create(module=module, site=site, from_on=day(placed))
        return module

    def fit(
        self,
        module: Module,
        fitted: int | None,
        removed: int | None = None,
        reason: str = "",
        *,
        failed: int | None = None,
        last_good: int | None = None,
        known: int | None = None,
        **fields: Any,
    ) -> Fitting:
        """A fitting in a position of its own, so that stories of one module never touch."""
        self.number += 1
        position = Position.objects.create(type=self.type, code=f"P{self.number}", component=self.component)
        fields.setdefault("part", self.n1)
        return Fitting.objects.create(
            code=f"F-{self.number}",
            module=module,
            position=position,
            fitted_on=None if fitted is None else day(fitted),
            removed_on=None if removed is None else day(removed),
            reason=reason,
            failed_on=None if failed is None else day(failed),
            last_good_on=None if last_good is None else day(last_good),
            removed_known_on=None if known is None else day(known),
            **fields,
        )

    def visit(self, module: Module, at: float, known: int | None = None) -> Visit:
        self.number += 1
        return Visit.objects.create(
            code=f"V-{self.number}",
            module=module,
            happened_at=instant(at),
            happened_on=day(int(at)),
            known_on=day(int(at) if known is None else known),
        )

    def read(self, module: Module, at: float, known: int | None = None, **faces: Any) -> None:
        known_on = day(int(at) if known is None else known)
        CounterReading.objects.create(module=module, read_at=instant(at), known_on=known_on, **faces)

    def stop(self, module: Module, since: float, until: float | None) -> None:
        running_at = None if until is None else instant(until)
        Stop.objects.create(module=module, stopped_at=instant(since), running_at=running_at, known_on=day(int(since)))

    def lives(self, as_of: int, *, known_on: int | None = None, rebuild: bool = True, **choices: Any) -> FleetLives:
        if rebuild:
            rebuild_clocks()
        known = None if known_on is None else day(known_on)
        return lives("NUT", as_of=day(as_of), known_on=known, **choices)


def rows_of(found: FleetLives) -> list[Row]:
    """(entry, age, state, last good, how many), in order."""
    if found.lifetimes is None:
        return []
    data = found.lifetimes
    goods: Sequence[float | None] = [None if good != good else good for good in data.last_good.tolist()]
    columns = zip(
        data.entries.tolist(), data.durations.tolist(), found.states.tolist(), goods, data.weights.tolist(), strict=True
    )
    return sorted(((entry, age, state, good, int(weight)) for entry, age, state, good, weight in columns), key=repr)


def left_out(found: FleetLives) -> dict[str, int]:
    return {row.reason: row.count for row in found.left_out}
