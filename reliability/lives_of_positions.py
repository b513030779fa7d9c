"""Lives one by one, each with its position: what a comparison within positions needs, under the rules of all lives."""

from __future__ import annotations

import datetime as dt
from collections.abc import Mapping
from typing import Any, NamedTuple

from django.db import connection

from fleet.models import Fitting
from reliability.life_question import asked_of, life_question
from reliability.life_sql import lives_of_positions as query_of
from reliability.lifetimes_from_fleet import reporting_lags


class PositionLife(NamedTuple):
    """One fitting in the database's own numbers, or the reason why it tells nothing."""

    module: int
    position: int
    part: int
    also: Any
    left_out: str | None
    state: str  # failed, other mode, worn, not known, withdrawn, running
    entry: float | None
    duration: float | None
    last_good: float | None
    site: int | None
    fitted_day: int | None
    last_day: float | None


def lives_of_positions(
    component: Any, *, starts: Mapping[int, dt.date] | None = None, **choices: Any
) -> list[PositionLife]:
    """A row a fitting, under the choices of `lives`.

    `starts` gives each site (by number) the day on which observation begins there: a part that was already in enters
    at its age on that day, and what ended before is left out.
    """
    asked = asked_of(component, by="part", **choices)
    days = {site: day.toordinal() for site, day in (starts or {}).items()}
    question = life_question(asked, reporting_lags(asked.as_of), days)
    with connection.cursor() as cursor:
        cursor.execute(*query_of(question))
        return [PositionLife(*row) for row in cursor.fetchall()]


def first_fitted(component: Any, parts: list[str], as_of: dt.date) -> dict[int, dt.date]:
    """For each site (by number) the day on which the first of these parts went in there."""
    fitted = (
        Fitting.objects.standing()
        .filter(part__component__code=component, part__code__in=parts, fitted_on__lte=as_of)
        .exclude(clock__site=None)
        .values_list("clock__site", "fitted_on")
        .order_by("fitted_on")
    )
    first: dict[int, dt.date] = {}
    for site, day in fitted.distinct():
        first.setdefault(site, day)
    return first
