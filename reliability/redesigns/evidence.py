"""What the records say of old and new parts, as plain values: ratio of lives, tests, means, single failure modes.

The figures that decide come from parts watched over the same dates at the same sites; those from all history stand
beside them and are named, since water, season and habits change with the calendar.
"""

from __future__ import annotations

import math
from collections.abc import Collection
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import special

from reliability.life_answer import finite
from reliability.redesigns.compared import AFTER, BEFORE, Compared
from reliability.stats.difference import counted_when_found, logrank, restricted_mean_difference
from reliability.stats.difference_logrank import ROUNDING
from reliability.stats.difference_sums import age_weights, risk_sets, weighted_sums
from reliability.stats.errors import StatisticsError
from reliability.stats.life_ratio import LifeRatio, Ratio, life_ratio
from reliability.stats.life_regression import fit_weibull_regression
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.ranks import first_rows, ranked
from reliability.stats.sequential import Look
from reliability.stats.sequential_path import path_of_looks

POSITIONS = "positions differ"
FEWEST_SITES_LEFT_OUT = 3
EARLIER = 0.75  # of the last age, where some site did not get that far
TESTS = (
    ("site", "by site", 0, 0),
    ("position", "by position", 0, 0),
    ("site", "by site, early failures weigh more", 1, 0),
    ("site", "by site, late failures weigh more", 0, 1),
    ("", "not stratified", 0, 0),
)


def evidence_of(
    lives: Compared, confidence: float, *, without: Collection[str] = (), now: Look | None = None
) -> dict[str, Any]:
    """Tests, restricted means and life ratios of one comparison; what cannot be told is None, with its reason.

    without: ratios that are not asked for. The one with positions that differ is never told here: it needs their past.
    now: the last look at these lives by position, where one was taken.
    """
    notes: list[str] = []
    return {
        "tests": log_rank_tests(lives, notes, now),
        "restricted_mean": restricted_mean_of(lives, confidence, notes),
        "ratio": ratio_of(lives, confidence, notes, without),
        "notes": list(dict.fromkeys(notes)),
    }


def both_sides(lives: Compared) -> tuple[Lifetimes, Lifetimes] | None:
    before, after = lives.side(BEFORE), lives.side(AFTER)
    return None if before is None or after is None else (before, after)


def strata_of(lives: Compared, strata: str) -> NDArray[Any] | None:
    """Labels by site; None without strata."""
    assert lives.lifetimes is not None
    return lives.lifetimes.site_codes if strata == "site" else None


def log_rank_tests(lives: Compared, notes: list[str], now: Look | None = None) -> list[dict[str, Any]]:
    """Log-rank tests; z above 0: the old parts fail sooner."""
    found = []
    both = both_sides(lives) is not None
    scores = _by_site(lives) if both else {}
    for test in TESTS:
        strata, name, rho, gamma = test
        row: dict[str, Any] = {"strata": name, "rho": rho, "gamma": gamma, "z": None, "p": None, "information": None}
        if both:
            try:
                score, variance = by_position(lives, now) if strata == "position" else _told(lives, test, scores[name])
                z = score / math.sqrt(variance)
                row.update(z=finite(z), p=finite(float(special.chdtrc(1, z * z))), information=finite(variance))
                row["excess"] = finite(score)
            except StatisticsError as error:
                notes.append(str(error))
        found.append(row)
    return found


def _by_site(lives: Compared) -> dict[str, tuple[float, float]]:
    """Score and variance of each test but that by position: those by site look at the same risk sets."""
    assert lives.pooled is not None
    pooled, found = counted_when_found(lives.pooled), {}
    # labels sort as after, before: code 1 is the old side
    for strata, codes in (("site", pooled.site_codes), ("", np.zeros(len(pooled), dtype=np.int64))):
        sets = risk_sets(pooled, pooled.group_codes, 2, codes)
        for _, name, rho, gamma in (test for test in TESTS if test[0] == strata):
            weights = age_weights(sets, "fleming-harrington", rho, gamma)
            observed, expected, covariance = weighted_sums(sets, weights)
            found[name] = float(observed[1] - expected[1]), float(covariance[1, 1])
    return found


def _told(lives: Compared, test: tuple[str, str, float, float], found: tuple[float, float]) -> tuple[float, float]:
    """Score and variance; where there is none the test itself says in words why nothing can be compared."""
    assert lives.pooled is not None
    strata, _, rho, gamma = test
    if found[1] <= ROUNDING * lives.pooled.failures:
        pooled = counted_when_found(lives.pooled)
        logrank(pooled, strata=pooled.site_codes if strata else None, rho=rho, gamma=gamma)
    return found


def by_position(lives: Compared, now: Look | None = None) -> tuple[float, float]:
    """The same within each position at a site: most positions hold one kind of part and are not looked at."""
    assert lives.lifetimes is not None
    found = counted_when_found(lives.lifetimes)
    strata = lives.positions * len(found.site_labels) + found.site_codes
    # where lives were left out some positions have none
    places, place = ranked(lives.positions)
    first = found.site_codes[first_rows(place, places.size)]
    if now is not None and (first[place] == found.site_codes).all():
        # no module has moved to another site: the look within positions is the same
        score, variance = now.position_score or 0.0, now.position_information or 0.0
    else:
        path = path_of_looks(found, lives.is_new, strata, lives.begun, lives.ended, [np.inf])
        score, variance = float(path.score[0]), float(path.information[0])
    if variance <= ROUNDING * found.failures:
        logrank(found, strata=strata)  # says in words why nothing can be compared
    return score, variance


def restricted_mean_of(lives: Compared, confidence: float, notes: list[str]) -> dict[str, Any] | None:
    """Mean life up to an age that both sides have reached: new less old."""
    sides = both_sides(lives)
    if sides is None:
        return None
    before, after = (counted_when_found(side) for side in sides)
    last = min(float(side.durations.max()) for side in (before, after))
    common = set(before.site_labels.tolist()) | set(after.site_labels.tolist())
    reason = ""
    interval = "sites" if len(common) >= FEWEST_SITES_LEFT_OUT else "log-log"
    for kind, horizon in ((interval, last), (interval, EARLIER * last), ("log-log", last)):
        try:
            found = restricted_mean_difference(before, after, horizon, confidence, interval=kind, minimum_at_risk=5)
        except StatisticsError as error:
            reason = str(error)
            continue
        return {
            "horizon": finite(found.horizon),
            "from": finite(found.given_survival_to),
            "before": finite(found.first.estimate),
            "after": finite(found.second.estimate),
            "difference": {
                "estimate": finite(found.estimate),
                "lower": finite(found.lower),
                "upper": finite(found.upper),
            },
            "interval": kind,
            "p": finite(found.p_value),
        }
    notes.append(f"Restricted mean: {reason}")
    return None


def ratio_of(
    lives: Compared, confidence: float, notes: list[str], without: Collection[str] = ()
) -> dict[str, Any] | None:
    """Life of the new parts over that of the old: with sites that differ, and beside it under other assumptions."""
    sides = both_sides(lives)
    if sides is None:
        return None
    before, after = (counted_when_found(side) for side in sides)
    ways: dict[str, dict[str, Any]] = {
        "sites differ": {},
        POSITIONS: {},
        "one shape for both": {"common_shape": True},
        "lives independent": {"sites": (np.zeros(len(before)), np.zeros(len(after)))},
    }
    answer: dict[str, Any] = {}
    for name, how in ways.items():
        if name in without or name == POSITIONS:
            answer[name] = None  # keeps its place among the others
            continue
        try:
            answer[name] = told_ratio(life_ratio(before, after, confidence_level=confidence, **how))
        except StatisticsError as error:
            notes.append(str(error))
            answer[name] = None
    return answer if answer["sites differ"] or answer["one shape for both"] else None


def at_like_duty(lives: Compared, a_day: NDArray[np.float64], confidence: float) -> dict[str, Any] | None:
    """Life ratio of new over old at equal use a day, by accelerated-life regression; None where it cannot be told.

    a_day: use of each life's module, NaN where no counter says so.
    """
    if lives.lifetimes is None or both_sides(lives) is None:
        return None
    known = ~np.isnan(a_day) & (a_day > 0)
    if not known.any():
        return None
    kept = counted_when_found(lives.lifetimes.subset(known))
    covariates = {"new": lives.is_new[known].astype(float), "duty": np.log(a_day[known])}
    sites = len(kept.site_labels) >= FEWEST_SITES_LEFT_OUT + 2
    try:
        fit = fit_weibull_regression(kept, covariates)
        found = fit.life_ratio("new", confidence_level=confidence, method="sites" if sites else "likelihood-ratio")
    except StatisticsError:
        return None
    return {
        "estimate": finite(found.estimate),
        "lower": finite(found.lower),
        "upper": finite(found.upper),
        "method": found.method,
    }


def told_ratio(found: LifeRatio) -> dict[str, Any]:
    return {
        "b10": limits_of(found.b10),
        "median": limits_of(found.median),
        "shapes": [finite(found.before_shape), finite(found.after_shape)],
        "spread": finite(found.spread),
        "clusters": found.clusters,
        "method": found.median.method,
    }


def limits_of(ratio: Ratio) -> dict[str, Any]:
    answer: dict[str, Any] = {
        "estimate": finite(ratio.estimate),
        "lower": finite(ratio.lower),
        "upper": finite(ratio.upper),
    }
    ends = (("lower", ratio.lower_unbounded), ("upper", ratio.upper_unbounded))
    if unbounded := [name for name, is_open in ends if is_open]:
        answer["unbounded"] = unbounded
    return answer
