"""Log-likelihood of lives whose level depends on covariates, with analytic derivatives, for every kind of row."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from reliability.stats import lognormal_likelihood, weibull_likelihood
from reliability.stats.lifetimes import FloatArray, IntArray, Lifetimes
from reliability.stats.lognormal_likelihood import HALF_LOG_TWO_PI, chained_rows, log_survival_terms
from reliability.stats.newton import Evaluation
from reliability.stats.weibull_likelihood import (
    LARGEST_LOG_HAZARD,
    ROWS_AT_ONCE,
    IntervalRows,
    interval_rows,
    reference_log_age,
)

LARGEST_LOG_SHAPE = 50.0


@dataclass(frozen=True, eq=False)
class CovariateRows:
    """Terms of one kind: x = log age - log reference (n,), signed weights (n,), design (n, p), owning row (n,)."""

    x: FloatArray
    weights: FloatArray
    design: FloatArray
    owner: IntArray


@dataclass(frozen=True, eq=False)
class RegressionLikelihood:
    """Log-likelihood in (log shape, g_1 … g_p): z = shape x + design @ g, x = log age - log reference.

    With shape = 1 / the spread of log life, z is the log cumulative hazard of a Weibull and the standard normal
    deviate of a lognormal, as in `WeibullLikelihood` and `LognormalLikelihood`, whose row terms are used. A life's
    expected log is -design @ g / shape plus a constant. Entries are rows of their own with minus the weight.
    """

    lognormal: bool
    log_reference: float
    exact: CovariateRows
    survival: CovariateRows
    intervals: CovariateRows
    interval_ends: IntervalRows
    constant: float  # minus the sum of weight log age over exact failures

    @np.errstate(over="ignore", under="ignore", invalid="ignore", divide="ignore")
    def __call__(self, point: FloatArray) -> Evaluation:
        """Value, gradient (1 + p,) and second derivatives (1 + p, 1 + p)."""
        size = point.size
        if not (abs(point[0]) < LARGEST_LOG_SHAPE and np.isfinite(point).all()):
            return outside(size)
        value, gradient, hessian = self.constant, np.zeros(size), np.zeros((size, size))
        for rows, terms in self._terms(point):
            weighted = terms * rows.weights
            value += float(weighted[0].sum())
            gradient[0] += weighted[1].sum()
            gradient[1:] += weighted[2] @ rows.design
            hessian[0, 0] += weighted[3].sum()
            hessian[0, 1:] += weighted[4] @ rows.design
            hessian[1:, 1:] += rows.design.T @ (weighted[5][:, None] * rows.design)
        hessian[1:, 0] = hessian[0, 1:]
        if not (math.isfinite(value) and np.isfinite(gradient).all() and np.isfinite(hessian).all()):
            return outside(size)
        return value, gradient, hessian

    @np.errstate(over="ignore", under="ignore", invalid="ignore", divide="ignore")
    def by_cluster(self, point: FloatArray, codes: IntArray, count: int) -> tuple[FloatArray, FloatArray]:
        """Gradient (count, 1 + p) and second derivatives (count, 1 + p, 1 + p) of each cluster of lives; codes (n,)."""
        size = point.size
        gradient, hessian = np.zeros((count, size)), np.zeros((count, size, size))
        for rows, terms in self._terms(point):
            weighted, cluster = terms * rows.weights, codes[rows.owner]

            def added(values: FloatArray, cluster: IntArray = cluster) -> FloatArray:
                return np.bincount(cluster, weights=values, minlength=count)

            gradient[:, 0] += added(weighted[1])
            hessian[:, 0, 0] += added(weighted[3])
            for i in range(size - 1):
                column = rows.design[:, i]
                gradient[:, 1 + i] += added(weighted[2] * column)
                hessian[:, 0, 1 + i] += added(weighted[4] * column)
                for j in range(i, size - 1):
                    hessian[:, 1 + i, 1 + j] += added(weighted[5] * column * rows.design[:, j])
        lower = np.tril_indices(size, -1)
        hessian[:, lower[0], lower[1]] = hessian[:, lower[1], lower[0]]
        return gradient, hessian

    def _terms(self, point: FloatArray) -> Iterator[tuple[CovariateRows, FloatArray]]:
        """Rows of one kind, in pieces, with value and derivatives by log shape and level: d_s, d_l, ss, sl, ll."""
        log_shape, shape, weights = float(point[0]), math.exp(point[0]), point[1:]
        exact = _normal_rows if self.lognormal else _weibull_rows
        survival = _normal_survival if self.lognormal else _weibull_survival
        for rows in _pieces(self.exact):
            yield rows, exact(log_shape, shape * rows.x, rows.design @ weights)
        for rows in _pieces(self.survival):
            yield rows, survival(shape * rows.x, rows.design @ weights)
        for place, rows in enumerate(_pieces(self.intervals)):
            yield rows, self._interval_terms(place, shape, rows.design @ weights)

    def _interval_terms(self, place: int, shape: float, level: FloatArray) -> FloatArray:
        part = slice(place * ROWS_AT_ONCE, (place + 1) * ROWS_AT_ONCE)
        ends = self.interval_ends
        piece = IntervalRows(ends.log_right[part], ends.log_ratio[part], ends.weights[part])
        module = lognormal_likelihood if self.lognormal else weibull_likelihood
        return np.stack(module.interval_row_terms(piece, shape, level))


def _pieces(rows: CovariateRows) -> Iterator[CovariateRows]:
    """So many rows at once that their terms take little memory."""
    for begin in range(0, rows.x.size, ROWS_AT_ONCE):
        part = slice(begin, begin + ROWS_AT_ONCE)
        yield CovariateRows(rows.x[part], rows.weights[part], rows.design[part], rows.owner[part])


def outside(size: int) -> Evaluation:
    """Where the likelihood cannot be told from none: the search turns back."""
    return -math.inf, np.zeros(size), np.zeros((size, size))


def _weibull_rows(log_shape: float, y: FloatArray, level: FloatArray) -> FloatArray:
    """log shape + w: the hazard of an exact failure; its survival stands among the survival rows."""
    one, none = np.ones_like(y), np.zeros_like(y)
    return np.stack([log_shape + y + level, 1.0 + y, one, y, none, none])


def _weibull_survival(y: FloatArray, level: FloatArray) -> FloatArray:
    hazard = -np.exp(np.minimum(y + level, LARGEST_LOG_HAZARD))
    first = hazard * y
    return np.stack([hazard, first, hazard, first * (1.0 + y), first, hazard])


def _normal_rows(log_steepness: float, y: FloatArray, level: FloatArray) -> FloatArray:
    z = y + level
    terms = chained_rows(log_steepness - 0.5 * z * z - HALF_LOG_TWO_PI, -z, np.full_like(z, -1.0), y)
    terms[1] += 1.0  # the density's height is proportional to the steepness
    return terms


def _normal_survival(y: FloatArray, level: FloatArray) -> FloatArray:
    return chained_rows(*log_survival_terms(y + level), y)


def regression_likelihood(lifetimes: Lifetimes, design: FloatArray, *, lognormal: bool) -> RegressionLikelihood:
    """Prepare the rows once; design (n, p) with the column of ones for the intercept."""
    log_reference = reference_log_age(lifetimes)
    exact, interval = lifetimes.is_exact, lifetimes.is_interval
    late = lifetimes.entries > 0.0
    if lognormal:
        ended, ends = ~lifetimes.observed, lifetimes.durations
    else:
        ends = np.where(interval, lifetimes.last_good, lifetimes.durations)
        ended = ends > 0.0

    def rows(chosen: np.ndarray, ages: FloatArray, sign: float = 1.0) -> CovariateRows:
        owner = np.flatnonzero(chosen)
        return CovariateRows(np.log(ages[owner]) - log_reference, sign * lifetimes.weights[owner], design[owner], owner)

    gone, came = rows(ended, ends), rows(late, lifetimes.entries, -1.0)
    failed = rows(exact, lifetimes.durations)
    return RegressionLikelihood(
        lognormal=lognormal,
        log_reference=log_reference,
        exact=failed,
        survival=CovariateRows(
            np.concatenate([gone.x, came.x]),
            np.concatenate([gone.weights, came.weights]),
            np.concatenate([gone.design, came.design]),
            np.concatenate([gone.owner, came.owner]),
        ),
        intervals=rows(interval, lifetimes.durations),
        interval_ends=interval_rows(lifetimes, log_reference),
        constant=-float(failed.weights @ (failed.x + log_reference)),
    )
