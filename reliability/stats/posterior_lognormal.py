"""Posterior of lognormal lives, the alternative that a forecast weighs against Weibull where records are many.

The same likelihood as for Weibull lives with cumulative hazard H(t) = -log Phi(-(log t - log median) / deviation)
times the site factor; the same priors: log deviation normal(log 0.6, 1), level H(t_ref)^(1/2) on a flat log scale.
The second axis of the grid is the log of the quantile in the middle of the failures, which does not move as the
deviation does.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import log
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.special import log_ndtr, ndtri

from reliability.stats.lifetimes import Lifetimes
from reliability.stats.posterior_draws import PosteriorDraws, site_columns
from reliability.stats.posterior_grid import refocused, resized, systematic, walk
from reliability.stats.posterior_likelihood import SiteSums, log_likelihood

FloatArray = NDArray[np.float64]

_COARSE = (13, 13)
_FINE = (15, 15)
_PRIOR = (log(0.6), 1.0)


class LognormalSums(SiteSums):
    """The same sums, read with lognormal hazards; points are (log deviation, log median), (points, 2)."""

    def levels(self, points: FloatArray, log_level: FloatArray) -> FloatArray:
        """The hazard's level is in the median already."""
        return log_level

    def cumulative(self, points: FloatArray, age_log: FloatArray) -> FloatArray:
        """-log survival at log age shares (n,): (points, n)."""
        with np.errstate(invalid="ignore"):
            return -log_ndtr(-self._standard(points, age_log))

    def exact_terms(self, points: FloatArray) -> FloatArray:
        """Sum over exact rows of log(hazard times age), (points,)."""
        standard = self._standard(points, self.exact_log)
        hazard = -0.5 * standard**2 - 0.5 * log(2.0 * np.pi) - log_ndtr(-standard) - points[:, :1]
        return hazard @ self.exact_weight

    def interval_steps(self, points: FloatArray) -> FloatArray:
        """Cumulative hazard within each interval row: (points, rows)."""
        with np.errstate(divide="ignore"):
            bounds = [self.cumulative(points, np.log(bound)) for bound in (self.high, self.low)]
        return np.maximum(bounds[0] - bounds[1], 1e-300)

    def _standard(self, points: FloatArray, age_log: FloatArray) -> FloatArray:
        return (age_log + self.log_greatest_age - points[:, 1:]) * np.exp(-points[:, :1])


@dataclass(frozen=True, eq=False)
class LognormalGrid:
    """Grid points (n,) of log deviation, log median and log spread, their weights (sum 1), and the log evidence."""

    log_deviation: FloatArray
    log_median: FloatArray
    log_spread: FloatArray
    weight: FloatArray
    evidence: float
    spread_step: float
    lifetimes: Lifetimes

    def draws(self, count: int, rng: np.random.Generator) -> PosteriorDraws:
        """Systematic sample of the sorted grid, as `WeibullPosterior.draws` makes it; no early share."""
        chosen = systematic(self.weight, count, rng)
        spreads = np.exp(self.log_spread[chosen] + self.spread_step * (rng.random(count) - 0.5))
        points = np.stack([self.log_deviation[chosen], self.log_median[chosen]], axis=1)
        factors: dict[Any, FloatArray] = {}
        if np.isfinite(self.log_spread).any():
            sums = LognormalSums.from_lifetimes(self.lifetimes)
            factors = site_columns(self.lifetimes, sums.draw_sites(points, np.zeros(count), spreads, rng))
        deviations = np.exp(points[:, 0])
        return PosteriorDraws(
            # a shape of like sharpness stands in where a grid asks how fine it must be
            shapes=1.3 / deviations,
            scales=np.exp(points[:, 1]),
            spreads=spreads,
            multipliers=factors,
            early_shares=np.zeros(count),
            deviations=deviations,
        )


def lognormal_grid(
    lifetimes: Lifetimes, log_spread: FloatArray, spread_prior: float, middle: tuple[float, float]
) -> LognormalGrid:
    """Grid posterior on the spreads of a Weibull one; middle: an age among the failures and the share failed by
    then.
    """
    spread = np.isfinite(log_spread).any()
    sums = LognormalSums.from_lifetimes(lifetimes, by_site=bool(spread))
    turn = float(ndtri(np.clip(middle[1], 1e-4, 0.95)))
    axes = [
        np.linspace(log(0.08), log(4.0), _COARSE[0]),
        np.linspace(log(middle[0]) - 1.5, log(middle[0]) + 1.5, _COARSE[1]),
        log_spread,
    ]
    for _ in range(8):
        logs = _log_weights(sums, axes, turn, spread_prior)
        limits = ((log(0.05), log(6.0)), (-np.inf, np.inf), (log_spread[0], log_spread[-1]))
        focused, settled = refocused(axes, logs, limits)
        axes = [focused[0], focused[1], log_spread]
        if settled:
            break
    axes = [resized(axes[0], _FINE[0]), resized(axes[1], _FINE[1]), log_spread]
    logs = _log_weights(sums, axes, turn, spread_prior)
    return _points(axes, logs, turn, lifetimes)


def _log_weights(sums: LognormalSums, axes: list[FloatArray], turn: float, spread_prior: float) -> FloatArray:
    points = _flat_points(axes, turn)
    spread = np.exp(axes[2])
    logs = log_likelihood(sums, points, np.zeros((len(points), 1)), spread)[:, 0, :]
    reference = sums.cumulative(points, np.zeros(1))[:, 0]
    prior = -0.5 * ((points[:, 0] - _PRIOR[0]) / _PRIOR[1]) ** 2
    logs = logs + (prior + 0.5 * np.log(np.maximum(reference, 1e-300)))[:, None]
    if axes[2].size > 1:
        logs = logs + axes[2] - spread / spread_prior
    return np.where(np.isfinite(logs), logs, -np.inf).reshape(axes[0].size, axes[1].size, axes[2].size)


def _flat_points(axes: list[FloatArray], turn: float) -> FloatArray:
    deviation, place = np.meshgrid(axes[0], axes[1], indexing="ij")
    return np.stack([deviation.ravel(), (place - turn * np.exp(deviation)).ravel()], axis=1)


def _points(axes: list[FloatArray], logs: FloatArray, turn: float, lifetimes: Lifetimes) -> LognormalGrid:
    peak = logs.max()
    weight = np.exp(logs - peak)
    steps = [axis[1] - axis[0] for axis in axes if axis.size > 1]
    points = _flat_points(axes, turn).reshape(axes[0].size, axes[1].size, 1, 2)
    order = walk(weight.shape)
    kept = order[weight.ravel()[order] > 1e-7]
    shape = (*weight.shape, 2)
    flat = np.broadcast_to(points, shape).reshape(-1, 2)[kept]
    return LognormalGrid(
        log_deviation=flat[:, 0],
        log_median=flat[:, 1],
        log_spread=np.broadcast_to(axes[2], weight.shape).ravel()[kept],
        weight=weight.ravel()[kept] / weight.ravel()[kept].sum(),
        evidence=float(peak + np.log(weight.sum()) + np.log(steps).sum() - log(_PRIOR[1])),
        spread_step=float(axes[2][1] - axes[2][0]) if axes[2].size > 1 else 0.0,
        lifetimes=lifetimes,
    )
