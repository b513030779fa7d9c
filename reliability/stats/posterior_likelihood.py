"""Weibull likelihood over a grid of shapes, levels and spreads between sites, from sums by site."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.special import gammaln

from reliability.stats.lifetimes import Lifetimes

FloatArray = NDArray[np.float64]

_NODES, _NODE_WEIGHTS = np.polynomial.hermite_e.hermegauss(3)
_NODE_WEIGHTS = _NODE_WEIGHTS / _NODE_WEIGHTS.sum()


@dataclass(frozen=True, eq=False)
class SiteSums:
    """What the likelihood needs of the rows: ages as shares of the greatest one, failures and rows by site.

    With level = scale^-shape an interval row is log(exp(-level L^shape) - exp(-level R^shape))
    = log level + log d - level (L^shape + d / 2) + log(sinh(x / 2) / (x / 2)), d = R^shape - L^shape, x = level d:
    an exact row with the exposure of its middle, and a correction that is x^2 / 24 for small x.
    """

    log_greatest_age: float
    age_log: FloatArray  # log of age over the greatest, one row a bound (durations, entries, interval bounds)
    age_weight: FloatArray  # signed weight of that bound's power in the site's exposure
    age_site: NDArray[np.int64]
    exact_log: FloatArray  # log of age share of exact failures, and their weights
    exact_weight: FloatArray
    failures: FloatArray  # failures of each site, intervals included
    low: FloatArray  # interval rows: lower and upper bound as shares of the greatest age
    high: FloatArray
    interval_weight: FloatArray
    interval_site: NDArray[np.int64]

    @classmethod
    def from_lifetimes(cls, lifetimes: Lifetimes, *, by_site: bool = True) -> SiteSums:
        """Sums of the (grouped) rows; all rows count as one site unless by_site."""
        greatest = float(lifetimes.durations.max())
        site = lifetimes.site_codes if by_site else np.zeros(len(lifetimes), dtype=np.int64)
        sites = max(int(site.max()) + 1, 1)
        weight, interval, exact = lifetimes.weights, lifetimes.is_interval, lifetimes.is_exact
        entered = lifetimes.entries > 0
        half = np.where(interval, 0.5 * weight, weight)
        had_good = interval & (np.nan_to_num(lifetimes.last_good) > 0)
        ages = np.concatenate([lifetimes.durations, lifetimes.last_good[had_good], lifetimes.entries[entered]])
        signed = np.concatenate([half, 0.5 * weight[had_good], -weight[entered]])
        where = np.concatenate([site, site[had_good], site[entered]])
        age_log, signed, where = _merged(np.log(ages / greatest), signed, where)
        return cls(
            log_greatest_age=float(np.log(greatest)),
            age_log=age_log,
            age_weight=signed,
            age_site=where,
            exact_log=np.log(lifetimes.durations[exact] / greatest),
            exact_weight=weight[exact],
            failures=np.bincount(site[lifetimes.observed], weight[lifetimes.observed], minlength=sites),
            low=lifetimes.last_good[interval] / greatest,
            high=lifetimes.durations[interval] / greatest,
            interval_weight=weight[interval],
            interval_site=site[interval],
        )

    def levels(self, points: FloatArray, log_level: FloatArray) -> FloatArray:
        """Log hazard level in units of the greatest age, from log_level (shapes, ...) = -shape log scale."""
        shape = points.reshape(-1, *(1,) * (log_level.ndim - 1))
        return log_level + shape * self.log_greatest_age

    def cumulative(self, points: FloatArray, age_log: FloatArray) -> FloatArray:
        """Cumulative hazard at level 1 of log age shares (n,): age^shape, (shapes, n)."""
        return np.exp(points[:, None] * age_log)

    def exact_terms(self, points: FloatArray) -> FloatArray:
        """Sum over exact rows of log(hazard times age) at level 1, (shapes,)."""
        return np.log(points) * self.exact_weight.sum() + points * (self.exact_weight @ self.exact_log)

    def exposures(self, points: FloatArray) -> FloatArray:
        """A_s = sum of cumulative hazards at level 1 less those at entry, by site: (shapes, sites)."""
        powers = self.cumulative(points, self.age_log) * self.age_weight
        starts = np.flatnonzero(np.diff(self.age_site, prepend=-1))
        totals = np.zeros((len(points), self.failures.size))
        totals[:, self.age_site[starts]] = np.add.reduceat(powers, starts, axis=1)
        return np.maximum(totals, 1e-300)

    def interval_steps(self, points: FloatArray) -> FloatArray:
        """Cumulative hazard at level 1 within each interval row: (shapes, rows)."""
        with np.errstate(divide="ignore"):
            top, bottom = points[:, None] * np.log(self.high), points[:, None] * np.log(self.low)
        return np.exp(top) * -np.expm1(bottom - top)

    def centred_levels(self, shape: FloatArray, offset: FloatArray) -> FloatArray:
        """Log level such that expected failures are exp(offset) times those seen (half at least): (shapes, offsets)."""
        total = self.exposures(shape).sum(axis=1)
        centre = np.log(self.failures.sum() + 0.5) - np.log(total) - shape * self.log_greatest_age
        return centre[:, None] + offset[None, :]

    def draw_sites(
        self, points: FloatArray, log_levels: FloatArray, spreads: FloatArray, rng: np.random.Generator
    ) -> FloatArray:
        """One factor for each draw and site given the rest: Gamma(D + 1/nu, 1/nu + Lambda), (draws, sites).

        Interval rows tilt that by their correction: one of twelve candidates is kept by its weight.
        """
        # draws come from a grid: far fewer shapes than draws
        distinct, which = np.unique(points, axis=0, return_inverse=True)
        level = self.levels(points, log_levels)
        expected = np.exp(level)[:, None] * self.exposures(distinct)[which]
        inverse = 1.0 / np.maximum(spreads, 1e-9)[:, None]
        form, rate = self.failures + inverse, inverse + expected
        if not self.low.size:
            return rng.gamma(form, 1.0 / rate)
        candidates = rng.gamma(form[..., None], 1.0 / rate[..., None], (*form.shape, 12))
        places = level[:, None, None] + np.log(np.maximum(candidates, 1e-30))
        table = CorrectionTable(self, self.interval_steps(distinct), places.min(), places.max(), pooled=False)
        sites = np.arange(self.failures.size)[None, :, None]
        keys = table.at(places, which[:, None, None], sites) + rng.gumbel(size=places.shape)
        return np.take_along_axis(candidates, keys.argmax(axis=2)[..., None], axis=2)[..., 0]


def log_likelihood(sums: SiteSums, points: FloatArray, log_level: FloatArray, spread: FloatArray) -> FloatArray:
    """Log-likelihood plus the sum of log age over exact rows, (shapes, levels, spreads); log_level is (shapes, levels).

    With spread nu > 0: sum over sites of log Gamma(D + 1/nu) - log Gamma(1/nu) - log(nu) / nu
    - (D + 1/nu) log(1/nu + Lambda); without it D log level - Lambda.
    """
    level = sums.levels(points, log_level)
    exposure = sums.exposures(points)
    total = sums.failures.sum()
    fixed = sums.exact_terms(points)
    step = sums.interval_steps(points)
    if sums.low.size:
        fixed = fixed + np.log(np.maximum(step, 1e-300)) @ sums.interval_weight
    common = fixed[:, None] + total * level
    if not spread.any():
        logs = common - np.exp(level) * exposure.sum(axis=1)[:, None]
        if sums.low.size and level.shape[1] == 1:
            logs = logs + (_correction(step * np.exp(level)) @ sums.interval_weight)[:, None]
        elif sums.low.size:
            table = CorrectionTable(sums, step, level.min(), level.max(), pooled=True)
            logs = logs + table.at(level, np.arange(len(points))[:, None], 0)
        return logs[..., None]
    return common[..., None] + _spread_terms(sums, step, level, exposure, spread)


def _spread_terms(
    sums: SiteSums, step: FloatArray, level: FloatArray, exposure: FloatArray, spread: FloatArray
) -> FloatArray:
    expected = np.exp(level)[:, :, None] * exposure[:, None, :]  # (shapes, levels, sites)
    terms = np.empty((*level.shape, spread.size))
    table = None
    if sums.low.size:
        table = CorrectionTable(sums, step, level.min() - 6.0, level.max() + 3.0, pooled=False)
    for index, nu in enumerate(spread):
        inverse = 1.0 / nu
        form, rate = sums.failures + inverse, inverse + expected
        constant = (gammaln(form) - gammaln(inverse)).sum() + sums.failures.size * inverse * np.log(inverse)
        terms[..., index] = constant - np.log(rate) @ form
        if table is not None:
            terms[..., index] += table.averaged(level, form, rate).sum(axis=2)
    return terms


class CorrectionTable:
    """Sum over a site's interval rows of log(sinh(x / 2) / (x / 2)), x = level d, on a grid of log level."""

    def __init__(self, sums: SiteSums, step: FloatArray, low: float, high: float, *, pooled: bool) -> None:
        self._grid = np.linspace(low - 0.1, high + 0.1, 24 if len(step) > 100 else 40)
        sites = 1 if pooled else sums.failures.size
        where = np.zeros_like(sums.interval_site) if pooled else sums.interval_site
        levels = np.exp(self._grid)
        by_site = np.zeros((len(step), sites, self._grid.size))
        for number, row in enumerate(step):
            merged, weights, codes = _binned(row, sums.interval_weight, where)
            share = np.zeros((sites, merged.size))
            share[codes, np.arange(merged.size)] = weights
            by_site[number] = share @ _correction(merged[:, None] * levels)
        self._logs = np.log(np.maximum(by_site, 1e-200))

    def at(self, level: FloatArray, shape_index: Any, site_index: Any) -> FloatArray:
        """Values at log levels, interpolated on the log scale, where they are almost straight (x^2 / 24 to x / 2)."""
        place = np.clip((level - self._grid[0]) / (self._grid[1] - self._grid[0]), 0, self._grid.size - 1.001)
        left = place.astype(np.int64)
        below = self._logs[shape_index, site_index, left]
        return np.exp(below + (place - left) * (self._logs[shape_index, site_index, left + 1] - below))

    def averaged(self, level: FloatArray, form: FloatArray, rate: FloatArray) -> FloatArray:
        """Log of the mean of exp(correction) over z ~ Gamma(form, rate), (shapes, levels, sites)."""
        # Wilson-Hilferty: the cube root of a gamma variate is nearly normal
        spread = 1.0 / (3.0 * np.sqrt(form))
        total = np.zeros(rate.shape)
        logs = []
        for node in _NODES:
            cube = np.maximum(1.0 - 1.0 / (9.0 * form) + node * spread, 0.05)
            places = level[:, :, None] + np.log(form / rate) + 3.0 * np.log(cube)
            logs.append(self.at(places, np.arange(level.shape[0])[:, None, None], np.arange(form.size)))
        peak = np.maximum.reduce(logs)
        for value, weight in zip(logs, _NODE_WEIGHTS, strict=True):
            total += weight * np.exp(value - peak)
        return peak + np.log(total)


def _correction(x: FloatArray) -> FloatArray:
    """log(sinh(x / 2) / (x / 2)) without overflow."""
    small = np.minimum(x, 0.1)
    series = small**2 / 24.0 - small**4 / 2880.0
    large = np.maximum(x, 0.1)
    return np.where(x < 0.1, series, large / 2.0 + np.log(-np.expm1(-large) / large))


def _binned(
    step: FloatArray, weight: FloatArray, site: NDArray[np.int64]
) -> tuple[FloatArray, FloatArray, NDArray[np.int64]]:
    """Rows of one site with nearly equal steps (within 5 %) share one: their root mean square, as the leading term
    asks.
    """
    if step.size < 60:
        return step, weight, site
    code = np.rint(np.log(np.maximum(step, 1e-30)) / 0.05).astype(np.int64)
    key = site * 4000 + (code - code.min())
    order, inverse = np.unique(key, return_inverse=True)
    weights = np.bincount(inverse, weight)
    squares = np.bincount(inverse, weight * step**2)
    return np.sqrt(squares / weights), weights, order // 4000


def _merged(
    age_log: FloatArray, weight: FloatArray, site: NDArray[np.int64]
) -> tuple[FloatArray, FloatArray, NDArray[np.int64]]:
    """Bounds in site order; beyond 4,000 of them equal ages (to 1 in 2,000) of a site share a row."""
    if age_log.size > 4000:
        code = np.rint(age_log * 2000.0).astype(np.int64)
        width = int(code.max() - code.min()) + 1
        key, inverse = np.unique(site * width + (code - code.min()), return_inverse=True)
        total = np.bincount(inverse, weight)
        mass = np.bincount(inverse, np.abs(weight))
        mean = np.bincount(inverse, np.abs(weight) * age_log) / mass
        return mean, total, key // width
    order = np.argsort(site, kind="stable")
    return age_log[order], weight[order], site[order]
