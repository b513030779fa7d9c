"""Log-likelihood of Weibull lives with its first and second derivatives, for every kind of row."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from reliability.stats.lifetimes import FloatArray, Lifetimes
from reliability.stats.newton import PlaneTerms

# beyond this a hazard integral means certain death to the last digit, and its exponential would overflow
LARGEST_LOG_HAZARD = 600.0
# stands for log(R / L) of an interval that begins at 0; exp(-800) is 0
FROM_ZERO = 800.0
ROWS_AT_ONCE = 16_384


@dataclass(frozen=True, eq=False)
class IntervalRows:
    """Failures in (L, R]: log R from the reference age, log(R / L), weights; shapes (m,)."""

    log_right: FloatArray
    log_ratio: FloatArray
    weights: FloatArray


@dataclass(frozen=True, eq=False)
class WeibullLikelihood:
    """Log-likelihood in the parameters (log shape, level), level = log of the cumulative hazard at the reference age.

    With x = log age - log reference and w = shape x + level the cumulative hazard of a life is exp(w). A row gives
        exact      log shape + w - log age - exp(w)
        withdrawn  -exp(w)
        interval   -exp(w_L) + log(1 - exp(-(exp(w_R) - exp(w_L))))
    and +exp(w_entry) where it entered late. All -exp(w) and +exp(w) terms are kept as one list of ages with signed
    weights, so that an evaluation is a single exponential over them; ages relative to the reference keep it from
    overflowing whatever the unit. For a fixed shape it is concave in the level.
    """

    log_reference: float
    log_ages: FloatArray  # x of the signed terms, shape (n,)
    signed_weights: FloatArray  # + where a life ended or was last good, - where it entered, shape (n,)
    intervals: IntervalRows | None
    exact_failures: float  # sum of weights
    sum_log_exact: float  # sum of weight x over exact failures
    constant: float  # minus the sum of weight log age over exact failures

    def scale_of(self, log_shape: float, level: float) -> float:
        """The scale in the unit of the durations: the age at which the cumulative hazard is 1."""
        return float(np.exp(self.log_reference - level * np.exp(-log_shape)))

    def __call__(self, log_shape: float, level: float) -> PlaneTerms:
        """Value, slopes in log shape and level, second derivatives (shape twice, both, level twice)."""
        if not (abs(log_shape) < 50.0 and abs(level) < 1e300):
            return -math.inf, 0.0, 0.0, 0.0, 0.0, 0.0
        shape = math.exp(log_shape)
        sum0, sum1, sum2 = self._hazard_sums(shape, level)
        failures, tilt = self.exact_failures, shape * self.sum_log_exact
        value = failures * (log_shape + level) + tilt + self.constant - sum0
        by_shape, by_level = failures + tilt - sum1, failures - sum0
        shape_twice, both, level_twice = tilt - sum1 - sum2, -sum1, -sum0
        if self.intervals is not None:
            more = interval_terms(self.intervals, shape, level)
            value, by_shape, by_level = value + more[0], by_shape + more[1], by_level + more[2]
            shape_twice, both, level_twice = shape_twice + more[3], both + more[4], level_twice + more[5]
        return value if math.isfinite(value) else -math.inf, by_shape, by_level, shape_twice, both, level_twice

    def _hazard_sums(self, shape: float, level: float) -> tuple[float, float, float]:
        """Sums over the signed terms of exp(w), exp(w) y and exp(w) y^2, y = shape x."""
        sums = np.zeros(3)
        with np.errstate(over="ignore", invalid="ignore", under="ignore"):
            # in pieces that stay in the processor's cache: twice as fast for a million rows, and little memory
            for begin in range(0, self.log_ages.size, ROWS_AT_ONCE):
                y = shape * self.log_ages[begin : begin + ROWS_AT_ONCE]
                hazard = y + level
                np.minimum(hazard, LARGEST_LOG_HAZARD, out=hazard)
                np.exp(hazard, out=hazard)
                hazard *= self.signed_weights[begin : begin + ROWS_AT_ONCE]
                sums[0] += hazard.sum()
                hazard *= y
                sums[1] += hazard.sum()
                # not hazard @ y: the threads of a dot product cost more than pieces of this size gain
                hazard *= y
                sums[2] += hazard.sum()
        return float(sums[0]), float(sums[1]), float(sums[2])

    def best_level(self, shape: float) -> float:
        """The level that maximises the likelihood for this shape; exact without intervals, else their right ends."""
        y = shape * self.log_ages
        top = float(y.max(initial=-1e300))
        total = float((np.exp(y - top) * self.signed_weights).sum())
        failures = self.exact_failures
        if self.intervals is not None:
            failures += float(self.intervals.weights.sum())
            right = shape * self.intervals.log_right
            top_right = max(top, float(right.max()))
            total = total * np.exp(top - top_right) + 0.5 * float(np.exp(right - top_right) @ self.intervals.weights)
            top = top_right
        return float(np.log(failures) - np.log(max(total, 1e-300)) - top)


def interval_terms(rows: IntervalRows, shape: float, level: float) -> PlaneTerms:
    """Sum of weight log(1 - exp(-D)), D = exp(w_R) - exp(w_L), with derivatives in (log shape, level).

    Everything is written in k = D / (exp(D) - 1) and r = d / (exp(d) - 1), d = shape log(R / L), which stay between 0
    and 1 however short or early the interval: no difference of nearly equal numbers is taken.
    """
    weights = rows.weights
    a, b, c, d, e, f = (float(term @ weights) for term in interval_row_terms(rows, shape, level))
    return a, b, c, d, e, f


def interval_row_terms(
    rows: IntervalRows, shape: float, level: float | FloatArray
) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray, FloatArray, FloatArray]:
    """The terms of `interval_terms` row by row; level may carry further axes that broadcast against the rows."""
    with np.errstate(over="ignore", under="ignore", invalid="ignore", divide="ignore"):
        d = np.minimum(shape * rows.log_ratio, FROM_ZERO)
        part = -np.expm1(-d)  # (H_R - H_L) / H_R
        r = d * (1.0 - part) / part
        y = shape * rows.log_right
        difference = np.exp(np.minimum(y + level, LARGEST_LOG_HAZARD)) * part
        chance = -np.expm1(-difference)
        k = difference * (1.0 - chance) / chance
        value = np.log(chance)
        tiny = difference < 1e-8
        if tiny.any():
            value = np.where(tiny, y + level + np.log(part) - 0.5 * difference, value)
            k = np.where(tiny, 1.0 - 0.5 * difference, k)
    m = y + r
    bend = k * difference + k * k
    by_shape_twice = -bend * m * m + k * (y * y + r * (2.0 * y - d) + m)
    return value, k * m, k, by_shape_twice, (k - bend) * m, k - bend


def interval_row_hazards(rows: IntervalRows, shape: float, level: float) -> tuple[FloatArray, FloatArray, FloatArray]:
    """log D of each row, and m and dm / d log shape where dD / d log shape = D m, shapes (m,)."""
    d = np.minimum(shape * rows.log_ratio, FROM_ZERO)
    with np.errstate(over="ignore", under="ignore"):
        r = d / np.expm1(np.minimum(d, 700.0)) * (d < 700.0)
    y = shape * rows.log_right
    m = y + r
    return y + level + np.log(-np.expm1(-d)), m, y * y + r * (2.0 * y - d) + m - m * m


def weibull_likelihood(lifetimes: Lifetimes) -> WeibullLikelihood:
    """Prepare the rows once: logs from the reference age, signed weights, equal ages merged."""
    exact, interval = lifetimes.is_exact, lifetimes.is_interval
    durations, weights = lifetimes.durations, lifetimes.weights
    log_reference = reference_log_age(lifetimes)
    ends = np.where(interval, lifetimes.last_good, durations) if lifetimes.has_intervals else durations
    signed = weights
    if lifetimes.has_entries:
        late = lifetimes.entries > 0
        ends = np.concatenate([ends, lifetimes.entries[late]])
        signed = np.concatenate([weights, -weights[late]])
    ages, signed = merged_ages(ends, signed)
    log_exact = np.log(durations[exact])
    exact_weights = weights[exact]
    exact_failures = float(exact_weights.sum())
    sum_log_exact = float(exact_weights @ log_exact)
    return WeibullLikelihood(
        log_reference=log_reference,
        log_ages=np.log(ages) - log_reference,
        signed_weights=signed,
        intervals=interval_rows(lifetimes, log_reference) if lifetimes.has_intervals else None,
        exact_failures=exact_failures,
        sum_log_exact=float(exact_weights @ (log_exact - log_reference)),
        constant=-sum_log_exact,
    )


def reference_log_age(lifetimes: Lifetimes) -> float:
    """Mean log age of the failures (or of all lives where none failed): the level is then near 0."""
    chosen = lifetimes.observed if lifetimes.observed.any() else np.ones(len(lifetimes), dtype=bool)
    weights = lifetimes.weights[chosen]
    return float(weights @ np.log(lifetimes.durations[chosen]) / weights.sum())


def interval_rows(lifetimes: Lifetimes, log_reference: float) -> IntervalRows:
    rows = lifetimes.is_interval
    left, right = lifetimes.last_good[rows], lifetimes.durations[rows]
    from_zero = left <= 0.0
    # log1p keeps the ratio of two nearly equal ages to the last digit
    ratio = np.where(from_zero, FROM_ZERO * 1e6, -np.log1p(-(right - left) / right, where=~from_zero, out=right * 0.0))
    return IntervalRows(np.log(right) - log_reference, ratio, lifetimes.weights[rows])


def merged_ages(ages: FloatArray, signed: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Ages > 0 and their signed weights; equal ages merged where that is cheap."""
    largest = ages.max(initial=0.0)
    if largest <= max(100_000, 4 * ages.size) and bool((ages == np.floor(ages)).all()):
        sums = np.bincount(ages.astype(np.int64), weights=signed)
        distinct = np.flatnonzero(sums).astype(float)
        sums = sums[sums != 0.0]
    elif ages.size <= 50_000:
        distinct, inverse = np.unique(ages, return_inverse=True)
        sums = np.bincount(inverse, weights=signed)
    else:
        distinct, sums = ages, signed
    kept = distinct > 0.0
    return (distinct, sums) if kept.all() else (distinct[kept], sums[kept])
