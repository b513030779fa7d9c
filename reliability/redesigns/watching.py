"""The path of the evidence since the rollout began, and the verdict that repeated looks allow."""

from __future__ import annotations

import datetime as dt
from typing import Any

import numpy as np

from reliability.life_answer import finite
from reliability.redesigns.compared import AFTER, Compared
from reliability.redesigns.evidence import strata_of
from reliability.stats.difference import counted_when_found
from reliability.stats.sequential import Look, planned_information, sequential_boundary, take_look, verdict

WEEK = 7
MOST_LOOKS = 60
USUAL_SHAPE = 2.0  # of the old parts while hardly one has failed


def looks_of(lives: Compared) -> list[Look]:
    """One look a week since the first site began, at most 60 (then evenly spaced), the last one now."""
    if lives.lifetimes is None or not lives.starts:
        return []
    first, last = min(lives.starts.values()).toordinal(), lives.as_of.toordinal()
    weeks = range(first + WEEK, last, WEEK)
    days = list(weeks) if len(weeks) <= MOST_LOOKS else np.linspace(first + WEEK, last, MOST_LOOKS)[:-1].astype(int)
    found = [_look(lives.as_seen_on(int(day)), dt.date.fromordinal(int(day))) for day in days]
    return [*(look for look in found if look is not None), *_now(lives)]


def _now(lives: Compared) -> list[Look]:
    look = _look(lives, lives.as_of)
    return [] if look is None else [look]


def _look(lives: Compared, on: dt.date) -> Look | None:
    if lives.lifetimes is None:
        return None
    return take_look(
        counted_when_found(lives.lifetimes),
        lives.lifetimes.groups == AFTER,
        sites=strata_of(lives, "site"),
        positions=lives.positions,
        label=on.isoformat(),
    )


def verdict_of(
    lives: Compared, hope: float, old_shape: float | None, probability: float | None
) -> tuple[dict[str, Any], list[dict[str, Any]]]:
    """The verdict as plain values, and the path to it: z beside the boundary at each look."""
    planned = planned_information(hope, old_shape or USUAL_SHAPE)
    looks = looks_of(lives)
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
