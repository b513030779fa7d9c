"""The path of the evidence since the rollout began, and the verdict that repeated looks allow."""

from __future__ import annotations

import datetime as dt
from typing import Any

import numpy as np

from reliability.life_answer import finite
from reliability.redesigns.compared import Compared
from reliability.stats.difference import counted_when_found
from reliability.stats.sequential import Look, planned_information, sequential_boundary, verdict
from reliability.stats.sequential_outlook import extra_modules, information_a_week, outlook
from reliability.stats.sequential_path import PathOfLooks, path_of_looks

WEEK = 7
LATELY = 13  # weeks whose failures say the present pace
AHEAD = 104  # weeks looked ahead
CHANCE = 0.8
MOST_LOOKS = 60
LARGE, MOST_LOOKS_OF_LARGE = 200_000, 26  # lives: each look costs as much as they are many
USUAL_SHAPE = 2.0  # of the old parts while hardly one has failed


def looks_of(lives: Compared, whole: Compared) -> list[Look]:
    """One look a week since the first site began, at most 60 (26 in a large fleet; then evenly spaced), the last now.

    The boundary holds for looks at any information however few: each look left out only takes a chance away to cross.

    lives are those watched over the same dates, which sites are compared by; whole all lives ever, which each position
    is compared with its own past by: over the same dates a position has hardly held an old part.
    """
    if lives.lifetimes is None or whole.lifetimes is None or not lives.starts:
        return []
    first, last = min(lives.starts.values()).toordinal(), lives.as_of.toordinal()
    weeks = range(first + WEEK, last, WEEK)
    most = MOST_LOOKS if len(whole.lifetimes) < LARGE else MOST_LOOKS_OF_LARGE
    days = list(weeks) if len(weeks) <= most else np.linspace(first + WEEK, last, most)[:-1].astype(int)
    labels = [*(dt.date.fromordinal(int(day)) for day in days), lives.as_of]
    until = np.array([*days, np.inf])
    by_site = _path(lives, lives.lifetimes.site_codes, until)
    by_position = _path(whole, whole.positions, until)
    return [
        Look(
            float(by_site.score[place]),
            float(by_site.information[place]),
            float(by_position.score[place]),
            float(by_position.information[place]),
            label.isoformat(),
        )
        for place, label in enumerate(labels)
        if by_site.seen[place] and by_position.seen[place]
    ]


def weeks_watched(lives: Compared) -> int:
    """Weeks since the first site began, each of which could have been a look."""
    first = min(lives.starts.values(), default=lives.as_of)
    return -(-(lives.as_of - first).days // WEEK)


def _path(lives: Compared, strata: Any, days: Any) -> PathOfLooks:
    assert lives.lifetimes is not None
    return path_of_looks(counted_when_found(lives.lifetimes), lives.is_new, strata, lives.begun, lives.ended, days)


def ahead_of(
    lives: Compared,
    now: Look | None,
    verdict: dict[str, Any],
    effects: Any,
    positions_a_module: float,
    by_week: int = 26,
) -> dict[str, Any] | None:
    """How long until it is clear at the present pace, and how many more modules would make it so by a date.

    None where the verdict stands already, or where nothing is gained at the present pace.
    """
    if verdict["final"] or now is None or lives.lifetimes is None:
        return None
    failures, share, rate = _pace(lives)
    weekly = float(information_a_week(failures, share))
    answer: dict[str, Any] = {
        "failures_a_week": finite(failures),
        "new_share": finite(share),
        "information_a_week": finite(weekly),
        "weeks": None,
        "weeks_sure": None,
        "clear_in": {},
        "by_week": by_week,
        "extra_modules": None,
        "looked_ahead": AHEAD,
    }
    if weekly <= 0:
        return answer
    ahead = outlook(now, verdict["planned"], weekly_information=weekly, effects=effects, weeks=AHEAD)
    answer["weeks"], answer["weeks_sure"] = ahead.weeks(0.5), ahead.weeks(CHANCE)
    answer["clear_in"] = {str(week): ahead.clear_by(week) for week in (13, 26, 52, AHEAD)}
    a_module = rate * positions_a_module * (1.0 - share)
    if a_module > 0 and share < 0.5:
        answer["extra_modules"] = extra_modules(
            now,
            verdict["planned"],
            weekly_information=weekly,
            information_a_module=a_module,
            effects=effects,
            by_week=by_week,
            chance=CHANCE,
        )
    return answer


def _pace(lives: Compared) -> tuple[float, float, float]:
    """Failures a week of late, the share of new parts among those running now, failures a week of one part."""
    assert lives.lifetimes is not None
    today = lives.as_of.toordinal()
    since = max(min(day.toordinal() for day in lives.starts.values()), today - LATELY * WEEK)
    weeks = max((today - since) / WEEK, 1.0)
    failures = float((lives.lifetimes.observed & (lives.ended > since)).sum()) / weeks
    running = lives.in_state("running")
    new, old = running & lives.is_new, running & ~lives.is_new
    both = float(new.sum() + old.sum())
    return failures, float(new.sum()) / both if both else 0.0, failures / both if both else 0.0


def verdict_of(
    looks: list[Look], hope: float, old_shape: float | None, probability: float | None
) -> tuple[dict[str, Any], list[dict[str, Any]]]:
    """The verdict as plain values, and the path to it: z beside the boundary at each look."""
    planned = planned_information(hope, old_shape or USUAL_SHAPE)
    path = [
        {
            "on": look.label,
            "z": finite(look.z),
            "position_z": finite(look.position_z),
            "information": finite(look.information),
            "boundary": finite(float(sequential_boundary(look.information, planned))),
        }
        for look in looks
    ]
    if not looks:
        looks = [Look(0.0, 0.0)]
    found = verdict(looks, planned, probability=probability)
    return {
        "phrase": found.phrase,
        "meaning": found.meaning,
        "z": finite(found.z),
        "boundary": finite(found.boundary),
        "share": finite(found.share),
        "position_z": finite(found.position_z),
        "decided_at": found.decided_at,
        "final": found.final,
        "planned": finite(planned),
        "shape": finite(old_shape or USUAL_SHAPE),
    }, path
