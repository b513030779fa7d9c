"""Histories from the records: the failures of each position in their order, and how hard each module is used."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from itertools import groupby
from typing import Any, NamedTuple

from django.db import connection
from django.db.models import F, Max, Min

from fleet.models import ClockPoint, Fitting, Site
from reliability.fleet_lives import NO_PLACE
from reliability.life_question import Asked, asked_of, life_question
from reliability.life_rules import Reason
from reliability.life_sql import single_lives
from reliability.lifetimes_from_fleet import reporting_lags

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


class _Stay(NamedTuple):
    left_out: str | None
    state: str
    entry: float | None
    duration: float | None
    site: int | None


def position_histories(component: Any, **choices: Any) -> list[PositionHistory]:
    """Histories under the choices of `lives`, as they stand in the records now."""
    asked = asked_of(component, **choices)
    text, parameters = single_lives(life_question(asked, reporting_lags(asked.as_of)))
    codes = dict(Site.objects.values_list("pk", "code"))
    with connection.cursor() as cursor:
        cursor.execute(text, parameters)
        rows = cursor.fetchall()
    found: list[PositionHistory] = []
    for (module, _), fitted in groupby(rows, key=lambda row: (row[0], row[1])):
        found += _histories(module, (_Stay(*row[2:]) for row in fitted), codes)
    return found


def _histories(module: int, stays: Iterable[_Stay], codes: dict[int, str]) -> Iterable[PositionHistory]:
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


class Duty(NamedTuple):
    """What a module does a day in service, and whether two readings of its own say so."""

    a_day: float
    measured: bool


def module_duties(asked: Asked, clock: str = "strokes") -> dict[str, Duty]:
    """Strokes (or hours) a day in service of the component's modules up to the as-of day, by the module's number."""
    limit = asked.as_of.toordinal() + 1
    with_parts = Fitting.objects.standing().filter(part__component=asked.component).values("module")
    knots = ClockPoint.objects.filter(module__in=with_parts, day__lt=limit, **{f"{clock}__isnull": False})
    spans = {"least": Min(clock), "most": Max(clock), "since": Min("days"), "until": Max("days")}
    duties: dict[str, Duty] = {}
    for readings_only in (False, True):
        chosen = knots.filter(**{f"{clock}_read": True}) if readings_only else knots
        for row in chosen.values(key=F("module_id")).annotate(**spans).order_by():
            used = row["until"] - row["since"]
            if used >= SHORTEST_USE and row["most"] > row["least"]:
                duties[str(row["key"])] = Duty((row["most"] - row["least"]) / used, readings_only)
    return duties
