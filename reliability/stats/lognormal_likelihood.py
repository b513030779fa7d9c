"""Log-likelihood of lognormal lives with its first and second derivatives, for every kind of row."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy import special

from reliability.stats.lifetimes import FloatArray, Lifetimes
from reliability.stats.newton import PlaneTerms
from reliability.stats.weibull_likelihood import IntervalRows, interval_rows, merged_ages, reference_log_age

HALF_LOG_TWO_PI = 0.5 * math.log(2.0 * math.pi)
# below this width on the z scale an interval is its midpoint's density times its width, to the last digit
NARROW = 0.02


@dataclass(frozen=True, eq=False)
class LognormalLikelihood:
    """Log-likelihood in (log steepness, level): z = steepness x + level, x = log age - log reference.

    steepness = 1 / sigma, so that z is linear in it as the Weibull's log hazard is in its shape. A row gives
        exact      log steepness + log phi(z) - log age
        withdrawn  log Phi(-z)
        interval   log(Phi(z_R) - Phi(z_L))
    and minus log Phi(-z_entry) where it entered late.
    """

    log_reference: float
    log_ages: FloatArray  # x of the log survival terms, shape (n,)
    signed_weights: FloatArray  # + where a life was withdrawn, - where it entered, shape (n,)
    intervals: IntervalRows | None
    exact_failures: float
    sum_x: float  # sum of weight x over exact failures
    sum_xx: float  # and of weight x squared
    constant: float

    def __call__(self, log_steepness: float, level: float) -> PlaneTerms:
        """Value, slopes in log steepness and level, second derivatives (steepness twice, both, level twice)."""
        if not (abs(log_steepness) < 50.0 and abs(level) < 1e100):
            return -math.inf, 0.0, 0.0, 0.0, 0.0, 0.0
        steepness = math.exp(log_steepness)
        terms = np.array(self._exact_terms(log_steepness, steepness, level))
        with np.errstate(over="ignore", under="ignore", invalid="ignore", divide="ignore"):
            if self.log_ages.size:
                y = steepness * self.log_ages
                value, slope, bend = log_survival_terms(y + level)
                terms += chained(value, slope, bend, y, self.signed_weights)
            if self.intervals is not None:
                terms += interval_terms(self.intervals, steepness, level)
        if not np.isfinite(terms).all():
            return -math.inf, 0.0, 0.0, 0.0, 0.0, 0.0
        return tuple(terms.tolist())

    def _exact_terms(self, log_steepness: float, steepness: float, level: float) -> PlaneTerms:
        d, s1, s2 = self.exact_failures, steepness * self.sum_x, steepness * steepness * self.sum_xx
        sum_zz = s2 + 2.0 * level * s1 + level * level * d
        value = d * (log_steepness - HALF_LOG_TWO_PI) - 0.5 * sum_zz + self.constant
        return value, d - s2 - level * s1, -s1 - level * d, -2.0 * s2 - level * s1, -s1, -d


def log_survival_terms(z: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
    """log Phi(-z) and its first two derivatives in z."""
    value = special.log_ndtr(-z)
    hazard = np.exp(-0.5 * z * z - HALF_LOG_TWO_PI - value)
    return value, -hazard, -hazard * (hazard - z)


def chained(value: FloatArray, slope: FloatArray, bend: FloatArray, y: FloatArray, weights: FloatArray) -> FloatArray:
    """Weighted sums of a function of z = y + level and its derivatives in (log steepness, level), shape (6,)."""
    slope, bend = slope * weights, bend * weights
    slope_y, bend_y = float(slope @ y), float(bend @ y)
    return np.array(
        [value @ weights, slope_y, slope.sum(), float((bend * y) @ y) + slope_y, bend_y, bend.sum()], dtype=float
    )


def chained_rows(value: FloatArray, slope: FloatArray, bend: FloatArray, y: FloatArray) -> FloatArray:
    """The same row by row, without weights, shape (6, n)."""
    slope_y, bend_y = slope * y, bend * y
    return np.stack([value, slope_y, slope, bend_y * y + slope_y, bend_y, bend])


def interval_terms(rows: IntervalRows, steepness: float, level: float) -> FloatArray:
    """Weighted sums of log(Phi(z_R) - Phi(z_L)) and its derivatives, shape (6,)."""
    return interval_row_terms(rows, steepness, np.full(rows.weights.size, level)) @ rows.weights


def interval_row_terms(rows: IntervalRows, steepness: float, level: FloatArray) -> FloatArray:
    """The same row by row, without weights, each row with its level (m,); shape (6, m)."""
    width = steepness * rows.log_ratio
    right = steepness * rows.log_right
    narrow = width < NARROW
    terms = np.zeros((6, width.size))
    if narrow.any():
        terms[:, narrow] = _narrow_terms(right[narrow] - 0.5 * width[narrow], width[narrow], level[narrow])
    if not narrow.all():
        wide = ~narrow
        terms[:, wide] = _wide_terms(right[wide], width[wide], level[wide])
    return terms


def _narrow_terms(y: FloatArray, width: FloatArray, level: FloatArray) -> FloatArray:
    """Density at the middle times the width, with the next term of the series, (z^2 - 1) width^2 / 24."""
    z = y + level
    terms = chained_rows(-0.5 * z * z - HALF_LOG_TWO_PI + np.log(width), -z, np.full_like(z, -1.0), y)
    part = width * width / 24.0
    terms += np.stack(
        [
            (z * z - 1.0) * part,
            (2.0 * z * y + 2.0 * (z * z - 1.0)) * part,
            2.0 * z * part,
            (2.0 * y * y + 10.0 * z * y + 4.0 * (z * z - 1.0)) * part,
            (2.0 * y + 4.0 * z) * part,
            2.0 * part,
        ]
    )
    terms[1] += 1.0  # the width is proportional to the steepness
    return terms


def _wide_terms(y_right: FloatArray, width: FloatArray, level: FloatArray) -> FloatArray:
    z_right = y_right + level
    from_zero = width > 1e5
    z_left = np.where(from_zero, -np.inf, z_right - width)
    y_left = np.where(from_zero, 0.0, y_right - width)
    # mirrored above 0, so that the difference is taken between the two smaller tails
    mirrored = z_left > 0.0
    larger = special.log_ndtr(np.where(mirrored, -z_left, z_right))
    smaller = special.log_ndtr(np.where(mirrored, -z_right, z_left))
    value = larger + np.log(-np.expm1(smaller - larger))
    at_right = np.exp(-0.5 * z_right * z_right - HALF_LOG_TWO_PI - value)
    at_left = np.where(from_zero, 0.0, np.exp(-0.5 * np.where(from_zero, 0.0, z_left) ** 2 - HALF_LOG_TWO_PI - value))
    z_left = np.where(from_zero, 0.0, z_left)
    twice_right, twice_left = -at_right * (z_right + at_right), at_left * (z_left - at_left)
    both = at_right * at_left
    by_log = at_right * y_right - at_left * y_left
    return np.stack(
        [
            value,
            by_log,
            at_right - at_left,
            twice_right * y_right**2 + 2.0 * both * y_right * y_left + twice_left * y_left**2 + by_log,
            twice_right * y_right + both * (y_right + y_left) + twice_left * y_left,
            twice_right + 2.0 * both + twice_left,
        ]
    )


def lognormal_likelihood(lifetimes: Lifetimes) -> LognormalLikelihood:
    """Prepare the rows once, as `weibull_likelihood` does."""
    log_reference = reference_log_age(lifetimes)
    withdrawn = ~lifetimes.observed
    entries = lifetimes.entries if lifetimes.has_entries else np.zeros(0)
    ends = np.concatenate([lifetimes.durations[withdrawn], entries])
    signed = np.concatenate([lifetimes.weights[withdrawn], -lifetimes.weights[: entries.size]])
    ages, signed = merged_ages(ends, signed)
    exact = lifetimes.is_exact
    weights = lifetimes.weights[exact]
    log_exact = np.log(lifetimes.durations[exact])
    x = log_exact - log_reference
    return LognormalLikelihood(
        log_reference=log_reference,
        log_ages=np.log(ages) - log_reference,
        signed_weights=signed,
        intervals=interval_rows(lifetimes, log_reference) if lifetimes.has_intervals else None,
        exact_failures=float(weights.sum()),
        sum_x=float(weights @ x),
        sum_xx=float(weights @ (x * x)),
        constant=-float(weights @ log_exact),
    )
