"""One failure mode at a time: “thread wear gone, water ingress unchanged”.

How many really fail by a mode is the cumulative incidence, the others acting too. Whether the mode itself changed is
asked with the others counted as withdrawals, and said so.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from fleet.formats import rounded
from reliability.life_answer import finite
from reliability.redesigns.compared import AFTER, BEFORE, Compared
from reliability.stats.difference import counted_when_found
from reliability.stats.difference_modes import ModeComparison, compare_modes
from reliability.stats.errors import StatisticsError
from reliability.stats.kaplan_meier import kaplan_meier
from reliability.stats.lifetimes import Lifetimes

AT_RISK = 5  # the shares are told at the greatest age that so many of each side have reached
ORDINARY = 1.96


def single_modes(lives: Compared, names: dict[str, str], confidence: float) -> dict[str, Any]:
    """For each mode its share by one age on both sides with limits, and the log-rank Z of the mode alone."""
    before, after = lives.side(BEFORE), lives.side(AFTER)
    if before is None or after is None:
        return {"age": None, "rows": []}
    age = float(rounded(common_age(before, after)))
    pooled, modes = lives.pooled_by_mode()
    try:
        found = compare_modes(
            counted_when_found(pooled), modes, age, strata=pooled.site_codes, confidence_level=confidence
        )
    except StatisticsError:
        return {"age": None, "rows": []}
    return {"age": finite(age), "rows": [told(each, names) for each in found]}


def common_age(before: Lifetimes, after: Lifetimes) -> float:
    """The age by which half of the old parts have failed, if both sides still have some parts there.

    Later on the shares of any two designs draw near each other, since everything fails of something in the end.
    """
    reached = min(_reached(side) for side in (before, after))
    try:
        middle = kaplan_meier(counted_when_found(before), minimum_at_risk=AT_RISK).quantile(0.5).estimate
    except StatisticsError:
        return reached
    return reached if middle is None else min(reached, float(middle))


def _reached(side: Lifetimes) -> float:
    """The greatest age that five of the side have reached, or all where there are fewer."""
    order = np.argsort(-side.durations, kind="stable")
    enough = np.cumsum(side.weights[order]) >= min(AT_RISK, side.count)
    return float(side.durations[order][np.argmax(enough)])


def told(found: ModeComparison, names: dict[str, str]) -> dict[str, Any]:
    """z above 0: rarer with the new part."""
    mode = str(found.mode)
    sides = {str(label): place for place, label in enumerate(found.groups.tolist())}
    # labels sort as after, before: the first group is the new one, so its z is turned round
    z = finite(-found.test.z) if found.test is not None else None
    row: dict[str, Any] = {"mode": mode or None, "name": names.get(mode, mode) if mode else "not named", "z": z}
    for side in (BEFORE, AFTER):
        place = sides[side]
        known = bool(found.known[place])
        row[f"{side}_failures"] = int(found.failures[place])
        row[side] = {
            "estimate": finite(float(found.incidence[place])) if known else None,
            "lower": finite(float(found.lower[place])) if known else None,
            "upper": finite(float(found.upper[place])) if known else None,
        }
    row["change"] = change_of(z)
    return row


def change_of(z: float | None) -> str:
    """One look at one mode: it names what to look into and is no verdict."""
    if z is None:
        return "we cannot tell"
    if abs(z) < ORDINARY:
        return "no clear change"
    return "rarer" if z > 0 else "more often"
