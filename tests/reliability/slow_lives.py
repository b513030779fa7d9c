"""Lives row by row by the rules in SQL, and looks one by one: the slow references of what reads columns."""

from __future__ import annotations

import datetime as dt
from collections.abc import Mapping
from typing import Any, NamedTuple

import numpy as np
from django.db import connection
from numpy.typing import NDArray

from reliability.life_question import asked_of, life_question
from reliability.life_sql import lives_of_positions as query_of
from reliability.lifetimes_from_fleet import reporting_lags
from reliability.redesigns.compared import AFTER, Compared
from reliability.redesigns.watching import MOST_LOOKS
from reliability.stats.difference import counted_when_found
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.sequential import Look, take_look


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


def slow_lives(component: Any, *, starts: Mapping[int, dt.date] | None = None, **choices: Any) -> list[PositionLife]:
    asked = asked_of(component, by="part", also="mode", **choices)
    days = {site: day.toordinal() for site, day in (starts or {}).items()}
    question = life_question(asked, reporting_lags(asked.as_of), days)
    with connection.cursor() as cursor:
        cursor.execute(*query_of(question))
        return [PositionLife(*row) for row in cursor.fetchall()]


def as_seen_on(lives: Compared, day: int) -> tuple[Lifetimes, NDArray[np.intp]] | None:
    """The lives as they stood on an earlier (ordinal) day, and their rows; None where nothing had been seen.

    Ages on that day lie on a straight line through each life's use; what ended later was still running.
    """
    found, later = lives.lifetimes, lives.ended > day
    assert found is not None
    share = np.clip((day - lives.begun) / np.maximum(lives.ended - lives.begun, 1.0), 0.0, 1.0)
    ages = np.floor(found.entries + share * (found.durations - found.entries) + 1e-9)
    durations = np.where(later, ages, found.durations)
    rows = np.flatnonzero(durations > found.entries)
    if not rows.size:
        return None
    cut = Lifetimes(
        durations[rows],
        (found.observed & ~later)[rows],
        entries=found.entries[rows],
        last_good=np.where(later, np.nan, found.last_good)[rows],
        sites=found.sites[rows],
        groups=found.groups[rows],
    )
    return cut, rows


def slow_looks(lives: Compared, whole: Compared) -> list[Look]:
    """As `looks_of`, each look from lives cut anew on its day."""
    assert lives.lifetimes is not None
    assert whole.lifetimes is not None
    first, last = min(lives.starts.values()).toordinal(), lives.as_of.toordinal()
    weeks = range(first + 7, last, 7)
    days = list(weeks) if len(weeks) <= MOST_LOOKS else np.linspace(first + 7, last, MOST_LOOKS)[:-1].astype(int)
    cuts = [(as_seen_on(lives, int(day)), as_seen_on(whole, int(day)), int(day)) for day in days]
    every = np.arange(len(lives.lifetimes)), np.arange(len(whole.lifetimes))
    cuts.append(((lives.lifetimes, every[0]), (whole.lifetimes, every[1]), last))
    found = []
    for beside, history, day in cuts:
        if beside is None or history is None:
            continue
        scores = []
        for (cut, rows), strata in ((beside, None), (history, whole.positions)):
            sites = cut.sites if strata is None else strata[rows]
            scores.append(take_look(counted_when_found(cut), cut.groups == AFTER, sites=sites))
        by_site, by_position = scores
        label = dt.date.fromordinal(day).isoformat()
        found.append(Look(by_site.score, by_site.information, by_position.score, by_position.information, label))
    return found
