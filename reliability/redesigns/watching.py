"""The path of the evidence since the rollout began, and the verdict that repeated looks allow."""

from __future__ import annotations

import datetime as dt
from dataclasses import replace
from typing import Any

import numpy as np

from reliability.life_answer import finite
from reliability.redesigns.compared import AFTER, BEFORE, Compared
from reliability.redesigns.evidence import strata_of
from reliability.stats.difference import counted_when_found
from reliability.stats.sequential import Look, planned_information, sequential_boundary, take_look, verdict
from reliability.stats.sequential_outlook import extra_modules, information_a_week, outlook

WEEK = 7
LATELY = 13  # weeks whose failures say the present pace
AHEAD = 104  # weeks looked ahead
CHANCE = 0.8
MOST_LOOKS = 60
USUAL_SHAPE = 2.0  # of the old parts while hardly one has failed


def looks_of(lives: Compared, whole: Compared) -> list[Look]:
    """One look a week since the first site began, at most 60 (then evenly spaced), the last one now.

    lives are those watched over the same dates, which sites are compared by; whole all lives ever, which each position
    is compared with its own past by: over the same dates a position has hardly held an old part.
    """
    if lives.lifetimes is None or not lives.starts:
        return []
    first, last = min(lives.starts.values()).toordinal(), lives.as_of.toordinal()
    weeks = range(first + WEEK, last, WEEK)
    days = list(weeks) if len(weeks) <= MOST_LOOKS else np.linspace(first + WEEK, last, MOST_LOOKS)[:-1].astype(int)
    whole = whole.chosen(~whole.rigs)
    found = [
        _look(lives.as_seen_on(int(day)), whole.as_seen_on(int(day)), dt.date.fromordinal(int(day))) for day in days
    ]
    return [*(look for look in found if look is not None), *_now(lives, whole)]


def _now(lives: Compared, whole: Compared) -> list[Look]:
    look = _look(lives, whole, lives.as_of)
    return [] if look is None else [look]


def _look(lives: Compared, whole: Compared, on: dt.date) -> Look | None:
    if lives.lifetimes is None or whole.lifetimes is None:
        return None
    by_site = take_look(
        counted_when_found(lives.lifetimes),
        lives.lifetimes.groups == AFTER,
        sites=strata_of(lives, "site"),
        label=on.isoformat(),
    )
    by_position = take_look(counted_when_found(whole.lifetimes), whole.lifetimes.groups == AFTER, sites=whole.positions)
    return replace(by_site, position_score=by_position.score, position_information=by_position.information)


def ahead_of(
    lives: Compared,
    whole: Compared,
    verdict: dict[str, Any],
    effects: Any,
    positions_a_module: float,
    by_week: int = 26,
) -> dict[str, Any] | None:
    """How long until it is clear at the present pace, and how many more modules would make it so by a date.

    None where the verdict stands already, or where nothing is gained at the present pace.
    """
    now = _now(lives, whole.chosen(~whole.rigs))
    if verdict["final"] or not now or lives.lifetimes is None:
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
    ahead = outlook(now[0], verdict["planned"], weekly_information=weekly, effects=effects, weeks=AHEAD)
    answer["weeks"], answer["weeks_sure"] = ahead.weeks(0.5), ahead.weeks(CHANCE)
    answer["clear_in"] = {str(week): ahead.clear_by(week) for week in (13, 26, 52, AHEAD)}
    a_module = rate * positions_a_module * (1.0 - share)
    if a_module > 0 and share < 0.5:
        answer["extra_modules"] = extra_modules(
            now[0],
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
    running = lives.states == "running"
    new = running & (lives.lifetimes.groups == AFTER)
    old = running & (lives.lifetimes.groups == BEFORE)
    both = float(new.sum() + old.sum())
    return failures, float(new.sum()) / both if both else 0.0, failures / both if both else 0.0


def verdict_of(
    lives: Compared, whole: Compared, hope: float, old_shape: float | None, probability: float | None
) -> tuple[dict[str, Any], list[dict[str, Any]]]:
    """The verdict as plain values, and the path to it: z beside the boundary at each look."""
    planned = planned_information(hope, old_shape or USUAL_SHAPE)
    looks = looks_of(lives, whole)
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
