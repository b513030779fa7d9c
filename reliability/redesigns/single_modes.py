"""One failure mode at a time: “thread wear gone, water ingress unchanged”.

How many really fail by a mode is the cumulative incidence, the others acting too. Whether the mode itself changed is
asked with the others counted as withdrawals, and said so.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from reliability.life_answer import finite
from reliability.redesigns.compared import AFTER, BEFORE, Compared
from reliability.redesigns.evidence import strata_of
from reliability.stats.competing import cumulative_incidence
from reliability.stats.difference import counted_when_found, logrank
from reliability.stats.errors import StatisticsError
from reliability.stats.kaplan_meier import kaplan_meier
from reliability.stats.lifetimes import Lifetimes

NOT_NAMED = ""
AT_RISK = 5  # the shares are told at the greatest age that so many of each side have reached
ORDINARY = 1.96


def single_modes(lives: Compared, names: dict[str, str], confidence: float) -> dict[str, Any]:
    """For each mode its share by one age on both sides with limits, and the log-rank Z of the mode alone."""
    before, after = lives.side(BEFORE), lives.side(AFTER)
    if before is None or after is None or lives.lifetimes is None:
        return {"age": None, "rows": []}
    age = common_age(before, after)
    found = sorted({str(mode) for mode in lives.modes[lives.lifetimes.observed].tolist()})
    sides = {side: _incidence(lives, side, confidence) for side in (BEFORE, AFTER)}
    rows = []
    for mode in found:
        row: dict[str, Any] = {"mode": mode or None, "name": names.get(mode, mode) if mode else "not named"}
        for side, known in sides.items():
            row[side] = _share(known, mode, age)
            row[f"{side}_failures"] = int(
                ((lives.modes == mode) & lives.lifetimes.observed & (lives.lifetimes.groups == side)).sum()
            )
        row["z"] = _alone(lives, mode)
        row["change"] = _change(row["z"])
        rows.append(row)
    return {"age": finite(age), "rows": rows}


def common_age(before: Lifetimes, after: Lifetimes) -> float:
    """The age by which half of the old parts have failed, if both sides still have some parts there.

    Later on the shares of any two designs draw near each other, since everything fails of something in the end.
    """
    reached = min(float(np.sort(side.durations)[-min(AT_RISK, len(side))]) for side in (before, after))
    try:
        middle = kaplan_meier(counted_when_found(before), minimum_at_risk=AT_RISK).quantile(0.5).estimate
    except StatisticsError:
        return reached
    return reached if middle is None else min(reached, float(middle))


def _incidence(lives: Compared, side: str, confidence: float) -> Any:
    assert lives.lifetimes is not None
    chosen = lives.lifetimes.groups == side
    try:
        return cumulative_incidence(
            counted_when_found(lives.lifetimes.subset(chosen)), lives.modes[chosen], confidence, minimum_at_risk=AT_RISK
        )
    except StatisticsError:
        return None


def _share(known: Any, mode: str, age: float) -> dict[str, float | None]:
    if known is None:
        return {"estimate": None, "lower": None, "upper": None}
    if mode not in known.modes:
        return {"estimate": 0.0, "lower": 0.0, "upper": None}
    try:
        lower, upper = known.band_at(mode, age)
        estimate = known.incidence_at(mode, age)
    except StatisticsError:
        return {"estimate": None, "lower": None, "upper": None}
    return {"estimate": finite(float(estimate)), "lower": finite(float(lower)), "upper": finite(float(upper))}


def _alone(lives: Compared, mode: str) -> float | None:
    """Z by site as if only this mode acted; above 0: rarer with the new part."""
    only = lives.if_only([mode])
    assert only.lifetimes is not None
    try:
        return finite(-logrank(counted_when_found(only.lifetimes), strata=strata_of(only, "site")).z)
    except StatisticsError:
        return None


def _change(z: float | None) -> str:
    """One look at one mode: it names what to look into and is no verdict."""
    if z is None:
        return "we cannot tell"
    if abs(z) < ORDINARY:
        return "no clear change"
    return "rarer" if z > 0 else "more often"
