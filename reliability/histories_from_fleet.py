"""Histories from the records: the failures of each position in their order, and how hard each module is used."""

from __future__ import annotations

import math
from bisect import bisect_left
from collections.abc import Iterable
from dataclasses import dataclass, replace
from itertools import groupby
from typing import TYPE_CHECKING, Any, NamedTuple

from django.db import connection
from django.db.models import F, Max, Min, Q

from fleet.models import ClockPoint, Fitting, Part, Site
from reliability.fleet_lives import NO_PLACE
from reliability.life_question import Asked, asked_of, life_question
from reliability.life_rules import Reason
from reliability.life_sql import single_lives
from reliability.lifetimes_from_fleet import reporting_lags

if TYPE_CHECKING:
    from reliability.stats.lifetimes import Lifetimes

MOST = 0.8  # share of the lives that a clock must be known for
SHORTEST_USE = 7.0  # days in service below which a module says nothing about its duty


@dataclass(frozen=True)
class PositionHistory:
    """One position since a new part went in: working time on the clock, the ages of the position at its failures.

    A part that came out for another reason ends no history: the next one begins new, at the same age of the position.
    """

    module: int
    site: str
    failures: tuple[float, ...]
    end: float
    other_removals: int


class _Life(NamedTuple):
    """One fitting as `single_lives` gives it."""

    id: int
    module: int
    position: int
    left_out: str | None
    state: str
    entry: float | None
    duration: float | None
    last_good: float | None
    site: int | None
    label: Any
    measured: bool
    fitted_day: float | None
    last_day: float | None


def position_histories(component: Any, **choices: Any) -> list[PositionHistory]:
    """Histories under the choices of `lives`, as they stand in the records now."""
    codes = dict(Site.objects.values_list("pk", "code"))
    found: list[PositionHistory] = []
    rows = _single_lives(asked_of(component, **choices))
    for (module, _), fitted in groupby(rows, key=lambda life: (life.module, life.position)):
        found += _histories(module, fitted, codes)
    return found


def _single_lives(asked: Asked) -> list[_Life]:
    text, parameters = single_lives(life_question(asked, reporting_lags(asked.as_of)))
    with connection.cursor() as cursor:
        cursor.execute(text, parameters)
        return [_Life(*row) for row in cursor.fetchall()]


def _histories(module: int, stays: Iterable[_Life], codes: dict[int, str]) -> Iterable[PositionHistory]:
    """Begins with a part that was new when it came under observation; a stay that is left out breaks it."""
    failures: list[float] = []
    end, others, site = 0.0, 0, NO_PLACE
    for stay in stays:
        if stay.left_out in (Reason.NO_AGE.value, Reason.TOO_LATE.value):
            continue
        unusable = stay.left_out is not None or stay.duration is None or stay.entry != 0
        if unusable:
            if end:
                yield PositionHistory(module, site, tuple(failures), end, others)
            failures, end, others = [], 0.0, 0
            continue
        end += float(stay.duration or 0)
        site = codes.get(stay.site or 0, NO_PLACE)
        if stay.state == "failed":
            failures.append(end)
        elif stay.state != "running":
            others += 1
    if end:
        yield PositionHistory(module, site, tuple(failures), end, others)


@dataclass(frozen=True, eq=False)
class LivesOnClocks:
    """The same lives in the same order on each clock that is known for most of them.

    interpolated: share of the counted strokes (hours) beyond the readings taken within the lives, by clock
    not_known: clocks that most lives do not have; dropped: lives that one of the clocks does not have
    """

    by_clock: dict[str, Lifetimes]
    interpolated: dict[str, float]
    not_known: list[str]
    dropped: int


def lives_on_clocks(component: Any, clocks: Iterable[str], **choices: Any) -> LivesOnClocks:
    asked = asked_of(component, **choices)
    told = {clock: _told_on(replace(asked, clock=clock)) for clock in clocks}
    longest = max((len(lives) for lives in told.values()), default=0)
    known = {clock: lives for clock, lives in told.items() if lives and len(lives) >= MOST * longest}
    codes = dict(Site.objects.values_list("pk", "code"))
    shared = set.intersection(*(set(lives) for lives in known.values())) if known else set()

    def told_by(key: int) -> list[Any]:
        """Rows in an order that does not depend on the database's numbers."""
        rows = [lives[key] for lives in known.values()]
        ages = [
            (float(row.duration or 0), float(row.entry or 0), float(row.last_good or -1), row.state) for row in rows
        ]
        return [codes.get(rows[0].site or 0, ""), *ages]

    keys = sorted(shared, key=told_by)
    parts = dict(Part.objects.filter(component=asked.component).values_list("pk", "code"))
    read_on = _reading_days(asked)
    by_clock, interpolated = {}, {}
    for clock, lives in known.items() if keys else ():
        rows = [lives[key] for key in keys]
        by_clock[clock] = _lifetimes(rows, codes, parts if asked.by == "part" else {})
        counted = [float(row.duration or 0) - float(row.entry or 0) for row in rows]
        read = read_on.get(clock, {})
        unread = [used * _unread(row, read) for used, row in zip(counted, rows, strict=True)]
        interpolated[clock] = 0.0 if clock == "days" else math.fsum(unread) / math.fsum(counted)
    return LivesOnClocks(by_clock, interpolated, [clock for clock in told if clock not in known], longest - len(keys))


def _told_on(asked: Asked) -> dict[int, _Life]:
    return {life.id: life for life in _single_lives(asked) if life.left_out is None}


def _reading_days(asked: Asked) -> dict[str, dict[int, list[float]]]:
    """The days on which counter and meter of each module were read, in order."""
    with_parts = Fitting.objects.standing().filter(part__component=asked.component).values("module")
    days: dict[str, dict[int, list[float]]] = {}
    for clock in ("strokes", "hours"):
        read: dict[int, list[float]] = {}
        knots = ClockPoint.objects.filter(module__in=with_parts, **{f"{clock}_read": True})
        for module, day in knots.order_by("module_id", "day").values_list("module_id", "day"):
            read.setdefault(module, []).append(day)
        days[clock] = read
    return days


def _unread(life: _Life, read_on: dict[int, list[float]]) -> float:
    """The share of a life's days that lies beyond the readings taken within it: there its days stand for its use."""
    days = read_on.get(life.module, [])
    if life.fitted_day is None or life.last_day is None:
        return 1.0
    first, after = bisect_left(days, life.fitted_day), bisect_left(days, life.last_day + 1)
    if first == after:
        return 1.0
    begun = life.fitted_day if first > 0 else days[first]
    covered = min(days[after - 1], life.last_day) - begun
    whole = life.last_day - life.fitted_day
    return 0.0 if whole <= 0 else min(1.0, max(0.0, 1.0 - covered / whole))


def _lifetimes(rows: list[_Life], sites: dict[int, str], parts: dict[int, str]) -> Lifetimes:
    import numpy as np

    from reliability.stats.lifetimes import Lifetimes

    return Lifetimes(
        np.array([row.duration for row in rows], dtype=float),
        np.array([row.state == "failed" for row in rows]),
        entries=np.array([row.entry for row in rows], dtype=float),
        last_good=np.array([np.nan if row.last_good is None else row.last_good for row in rows], dtype=float),
        sites=np.array([sites.get(row.site or 0, NO_PLACE) for row in rows]),
        groups=np.array([parts.get(row.label, "") for row in rows]),
    )


class Duty(NamedTuple):
    """What a module does a day in service, and whether two readings of its own say so."""

    a_day: float
    measured: bool


def module_duties(asked: Asked, clock: str = "strokes", *, of_all: bool = False) -> dict[str, Duty]:
    """Strokes (or hours) a day in service of the component's modules up to the as-of day, by the module's number.

    of_all: of whatever modules there are; with a million fittings that is quicker than finding the component's own.
    """
    limit = asked.as_of.toordinal() + 1
    knots = ClockPoint.objects.filter(day__lt=limit, **{f"{clock}__isnull": False})
    if not of_all:
        knots = knots.filter(
            module__in=Fitting.objects.standing().filter(part__component=asked.component).values("module")
        )
    read = Q(**{f"{clock}_read": True})
    spans = {
        "least": Min(clock),
        "most": Max(clock),
        "since": Min("days"),
        "until": Max("days"),
        "least_read": Min(clock, filter=read),
        "most_read": Max(clock, filter=read),
        "since_read": Min("days", filter=read),
        "until_read": Max("days", filter=read),
    }
    duties: dict[str, Duty] = {}
    for row in knots.values(key=F("module_id")).annotate(**spans).order_by():
        for measured, end in ((False, ""), (True, "_read")):
            if row[f"until{end}"] is None:
                continue
            used = row[f"until{end}"] - row[f"since{end}"]
            if used >= SHORTEST_USE and row[f"most{end}"] > row[f"least{end}"]:
                duties[str(row["key"])] = Duty((row[f"most{end}"] - row[f"least{end}"]) / used, measured)
    return duties
