"""Bands and intervals that hold where sites differ: whole sites are drawn again, not single lives."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy import special

from reliability.stats.errors import InvalidArgument, StatisticsError, UndefinedEstimate, UnsupportedRows
from reliability.stats.kaplan_meier import delayed_start, kaplan_meier
from reliability.stats.lifetimes import FloatArray, Lifetimes

# a survival drawn as exactly 0 or 1 is kept this far from the ends of the log(-log S) scale
EDGE = 1e-12


@dataclass(frozen=True, eq=False)
class SiteBand:
    """Kaplan–Meier survival at the ages with a pointwise band from drawing sites again, shapes (k,)."""

    ages: FloatArray
    survival: FloatArray
    lower: FloatArray
    upper: FloatArray
    confidence_level: float
    replicates: int
    sites: int
    band: str = "site bootstrap"


def site_bootstrap_band(
    lifetimes: Lifetimes,
    ages: ArrayLike | None = None,
    *,
    confidence_level: float = 0.95,
    replicates: int = 499,
    rng: np.random.Generator | None = None,
    minimum_at_risk: float = 0,
) -> SiteBand:
    """Band of the Kaplan–Meier curve from drawing as many sites with replacement, read at the ages (default: failures).

    Standard error of log(-log S) over the draws, times Student's t with sites - 1 degrees of freedom: with 16 sites it
    held 93 to 99 % in simulations where percentiles held 89 to 95 and Greenwood's band 52 to 94. Davison & Hinkley,
    Bootstrap Methods and their Application (1997), section 3.8 (clusters). One matrix product for all draws. Seeded
    (rng=None draws the same every time).
    Raises UnsupportedRows for interval rows, InvalidArgument without two sites.
    """
    if lifetimes.has_intervals:
        raise UnsupportedRows(
            "Some rows failed somewhere between two ages. Use site_bootstrap with turnbull for these."
        )
    _refuse(lifetimes, confidence_level, replicates)
    curve = kaplan_meier(lifetimes, confidence_level, minimum_at_risk=minimum_at_risk)
    wanted = curve.times if ages is None else np.atleast_1d(np.asarray(ages, dtype=float))
    survival = curve.survival_at(wanted)
    start = delayed_start(lifetimes, minimum_at_risk, None)
    failures, at_risk = _site_tables(lifetimes, curve.times, start)
    drawn = _drawn_sites(failures.shape[0], replicates, rng)
    with np.errstate(divide="ignore", invalid="ignore"):
        hazard = np.where((risk := drawn @ at_risk) > 0.0, (drawn @ failures) / risk, 0.0)
    curves = np.cumprod(np.maximum(1.0 - hazard, 0.0), axis=1)
    position = np.searchsorted(curve.times, wanted, side="right")
    at_ages = np.concatenate([np.ones((replicates, 1)), curves], axis=1)[:, position]
    lower, upper = _limits(survival, at_ages, failures.shape[0], confidence_level)
    return SiteBand(wanted, survival, lower, upper, confidence_level, replicates, failures.shape[0])


def site_bootstrap(
    lifetimes: Lifetimes,
    statistic: Callable[[Lifetimes], float],
    *,
    replicates: int = 199,
    rng: np.random.Generator | None = None,
) -> FloatArray:
    """The statistic of as many sites drawn with replacement, shape (replicates kept,).

    A site drawn twice enters as two sites' worth of weight. Draws for which the statistic raises a StatisticsError are
    left out; UndefinedEstimate where that is more than half. Seeded (rng=None draws the same every time).
    """
    _refuse(lifetimes, 0.95, replicates)
    codes = lifetimes.site_codes
    values = []
    for times_drawn in _drawn_sites(lifetimes.site_labels.size, replicates, rng):
        present = times_drawn[codes] > 0.0
        part = lifetimes.subset(present)
        try:
            values.append(float(statistic(part.reweighted(part.weights * times_drawn[codes[present]]))))
        except StatisticsError:
            continue
    if len(values) <= replicates // 2:
        raise UndefinedEstimate(
            f"Only {len(values)} of {replicates} draws of the sites allow the estimate. Too few sites have failures; "
            "use the interval with site spread instead."
        )
    return np.array(values)


def _refuse(lifetimes: Lifetimes, confidence_level: float, replicates: int) -> None:
    if lifetimes.sites is None or lifetimes.site_labels.size < 2:
        raise InvalidArgument("Drawing sites again needs lives from at least two sites. Use the band of kaplan_meier.")
    if not 0.0 < confidence_level < 1.0:
        raise InvalidArgument(f"The confidence level is {confidence_level:g}; it must lie between 0 and 1.")
    if replicates < 20:
        raise InvalidArgument(f"{replicates} draws are too few for limits; ask for at least 20.")


def _site_tables(lifetimes: Lifetimes, times: FloatArray, start: float) -> tuple[FloatArray, FloatArray]:
    """Failures and numbers at risk of each site at each failure age, shapes (S, k)."""
    sites = lifetimes.site_labels.size
    failures, at_risk = np.zeros((sites, times.size)), np.zeros((sites, times.size + 1))
    codes, weights = lifetimes.site_codes, lifetimes.weights
    failed = lifetimes.observed & (lifetimes.durations > start)
    np.add.at(failures, (codes[failed], np.searchsorted(times, lifetimes.durations[failed])), weights[failed])
    # at risk at the ages after the entry and up to the duration
    np.add.at(at_risk, (codes, np.searchsorted(times, lifetimes.entries, side="right")), weights)
    np.add.at(at_risk, (codes, np.searchsorted(times, lifetimes.durations, side="right")), -weights)
    return failures, np.cumsum(at_risk, axis=1)[:, :-1]


def _drawn_sites(sites: int, replicates: int, rng: np.random.Generator | None) -> FloatArray:
    """How often each site is drawn, shape (replicates, S)."""
    rng = np.random.default_rng(20) if rng is None else rng
    return rng.multinomial(sites, np.full(sites, 1.0 / sites), size=replicates).astype(float)


def _limits(
    survival: FloatArray, drawn: FloatArray, sites: int, confidence_level: float
) -> tuple[FloatArray, FloatArray]:
    def stretched(values: FloatArray) -> FloatArray:
        return np.log(-np.log(np.clip(values, EDGE, 1.0 - EDGE)))

    centre = stretched(survival)
    factor = special.stdtrit(sites - 1.0, 0.5 + 0.5 * confidence_level) * np.sqrt(sites / (sites - 1.0))
    half = factor * stretched(drawn).std(axis=0)
    with np.errstate(over="ignore", under="ignore"):
        lower, upper = np.exp(-np.exp(centre + half)), np.exp(-np.exp(centre - half))
    fixed = survival >= 1.0
    return np.where(fixed, 1.0, np.minimum(lower, survival)), np.where(fixed, 1.0, np.maximum(upper, survival))
