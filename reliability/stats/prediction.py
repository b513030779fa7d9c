"""Bounds for how many of the parts now running fail within a horizon: plugged-in, and calibrated by bootstrap.

Plugging the fitted parameters into the binomial understates: its bounds never reach their stated coverage, however
many the data of one cohort (Escobar & Meeker 1999, J. Am. Statist. Assoc. 94, 113; Tian, Meng, Nordman & Meeker,
arXiv 2007.08648). The calibrated bound is the plugged-in one at that level whose coverage over bootstrap parameters
is the stated level. First failures only; renewals within the horizon are the business of `counts.forecast_counts`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from reliability.stats.errors import InvalidArgument
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.weibull_fit import fit_weibull

FloatArray = NDArray[np.float64]

_STEPS = 25


@dataclass(frozen=True)
class CalibratedPrediction:
    """Expected failures, and one-sided bounds at `level` each: plugged-in and calibrated, with the levels they stand
    at.
    """

    expected: float
    level: float
    plug_in_lower: int
    plug_in_upper: int
    calibrated_lower: int
    calibrated_upper: int
    lower_level_used: float
    upper_level_used: float


def calibrated_prediction(
    lifetimes: Lifetimes,
    ages: ArrayLike,
    horizon: float,
    level: float,
    *,
    weights: ArrayLike | None = None,
    resamples: int = 2000,
    rng: np.random.Generator | None = None,
) -> CalibratedPrediction:
    """Bounds for the failures among parts aged `ages` (n,) within `horizon` (unit of the lives); weights: equal
    parts a row.

    level: of each one-sided bound, as 0.975 for a two-sided 95 % band. The bootstrap gives every life a random
    weight of mean 1 (gamma, the fractional random weight bootstrap: Xu, Gotwalt, Hong, King & Meeker 2020, Am.
    Statistician 74, 345), which serves any censoring. Interval rows enter it at their middle age.
    Raises InvalidArgument; TooFewFailures or NoSpreadInFailures where there is no Weibull fit.
    """
    rng = np.random.default_rng() if rng is None else rng
    age, count = _at_risk(ages, weights, horizon, level)
    fit = fit_weibull(lifetimes)
    shapes, scales = bootstrap_weibull(lifetimes, resamples, rng)
    truth = _pmfs(_chances(np.array([fit.shape]), np.array([fit.scale]), age, horizon), count)[0]
    size = truth.size
    drawn = _pmfs(_chances(shapes, scales, age, horizon), count, size)
    plugged = np.cumsum(truth)
    upper_level = _calibrated_level(np.cumsum(drawn, axis=1), plugged, level, upper=True)
    lower_level = _calibrated_level(np.cumsum(drawn, axis=1), plugged, level, upper=False)
    return CalibratedPrediction(
        expected=float(truth @ np.arange(size)),
        level=level,
        plug_in_lower=_quantile(plugged, 1.0 - level),
        plug_in_upper=_quantile(plugged, level),
        calibrated_lower=_quantile(plugged, 1.0 - lower_level),
        calibrated_upper=_quantile(plugged, upper_level),
        lower_level_used=lower_level,
        upper_level_used=upper_level,
    )


def _at_risk(ages: ArrayLike, weights: ArrayLike | None, horizon: float, level: float) -> tuple[FloatArray, FloatArray]:
    age = np.atleast_1d(np.asarray(ages, dtype=np.float64))
    count = np.broadcast_to(np.asarray(1.0 if weights is None else weights, dtype=np.float64), age.shape)
    if not (np.isfinite(age).all() and (age >= 0).all() and (count >= 0).all()):
        raise InvalidArgument("ages and weights must be finite and at least 0.")
    if not (np.isfinite(horizon) and horizon >= 0):
        raise InvalidArgument(f"horizon is {horizon:g}; it must be finite and at least 0.")
    if not 0.5 <= level < 1:
        raise InvalidArgument(f"level is {level:g}; it must be at least 0.5 and below 1.")
    distinct, inverse = np.unique(age, return_inverse=True)
    return distinct, np.bincount(inverse, count, minlength=distinct.size).astype(np.float64, copy=False)


def bootstrap_weibull(lifetimes: Lifetimes, resamples: int, rng: np.random.Generator) -> tuple[FloatArray, FloatArray]:
    """Shapes and scales (resamples,) fitted to the lives under random weights: all at once, by Newton on log shape."""
    middle = np.where(
        lifetimes.is_interval, 0.5 * (lifetimes.durations + np.nan_to_num(lifetimes.last_good)), lifetimes.durations
    )
    rows = Lifetimes(
        middle, lifetimes.observed, entries=np.minimum(lifetimes.entries, middle * 0.999), weights=lifetimes.weights
    )
    rows = rows.grouped()
    reference = float(rows.durations.max())
    weight = rng.gamma(np.broadcast_to(rows.weights, (resamples, len(rows))))
    failed = weight * rows.observed
    failures = failed.sum(axis=1)
    ages, entries = np.log(rows.durations / reference), np.log(np.maximum(rows.entries, 1e-300) / reference)
    mean_log = failed @ ages / failures
    entered = rows.entries > 0
    log_shape = np.full(resamples, np.log(max(fit_weibull(lifetimes).shape, 1e-3)))
    for _ in range(_STEPS):
        shape = np.exp(log_shape)
        a0, a1, a2 = _power_sums(weight, ages, shape)
        if entered.any():
            b0, b1, b2 = _power_sums(weight[:, entered], entries[entered], shape)
            a0, a1, a2 = a0 - b0, a1 - b1, a2 - b2
        slope = 1.0 / shape + mean_log - a1 / a0
        curve = -1.0 / shape**2 - a2 / a0 + (a1 / a0) ** 2
        step = np.clip(-slope / np.where(curve < 0, curve * shape, -1.0), -0.7, 0.7)
        log_shape = np.clip(log_shape + step, np.log(0.02), np.log(60.0))
        if np.abs(step).max() < 1e-8:
            break
    shape = np.exp(log_shape)
    total = _power_sums(weight, ages, shape)[0]
    if entered.any():
        total = total - _power_sums(weight[:, entered], entries[entered], shape)[0]
    return shape, reference * (total / failures) ** (1.0 / shape)


def _power_sums(weight: FloatArray, logs: FloatArray, shape: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Sums of w t^shape, w t^shape log t, w t^shape log^2 t, each (resamples,)."""
    power = weight * np.exp(shape[:, None] * logs)
    return power.sum(axis=1), power @ logs, power @ logs**2


def _chances(shapes: FloatArray, scales: FloatArray, age: FloatArray, horizon: float) -> FloatArray:
    """Chance to fail within the horizon given survival to the age, (parameters, ages)."""
    with np.errstate(over="ignore"):
        before = (age / scales[:, None]) ** shapes[:, None]
        after = ((age + horizon) / scales[:, None]) ** shapes[:, None]
    return -np.expm1(before - after)


def _pmfs(chances: FloatArray, count: FloatArray, size: int | None = None) -> FloatArray:
    """Poisson-binomial probabilities by one FFT each, (parameters, size); what lies beyond `size` wraps to its end."""
    mean = chances @ count
    deviation = np.sqrt((chances * (1.0 - chances)) @ count)
    needed = int(np.ceil((mean + 12.0 * deviation).max())) + 20
    length = max(needed, size or 0)
    angle = 2.0 * np.pi * np.arange(length // 2 + 1) / length
    found = []
    for chunk in np.array_split(chances, max(1, int(chances.size * angle.size / 4e6))):
        value = 1.0 + chunk[:, :, None] * (np.exp(1j * angle) - 1.0)
        logs = 0.5 * np.log(np.maximum(value.real**2 + value.imag**2, 1e-300))
        turn = np.arctan2(value.imag, value.real)
        spectrum = np.exp(np.einsum("pag,a->pg", logs + 1j * turn, count))
        found.append(np.maximum(np.fft.irfft(np.conj(spectrum), length, axis=1), 0.0))
    pmf = np.concatenate(found)
    if size is not None and length > size:
        pmf[:, size - 1] = pmf[:, size - 1 :].sum(axis=1)
        pmf = pmf[:, :size]
    return pmf / pmf.sum(axis=1, keepdims=True)


def _quantile(cumulative: FloatArray, p: float) -> int:
    return min(int(np.searchsorted(cumulative, p - 1e-12)), cumulative.size - 1)


def _calibrated_level(drawn: FloatArray, plugged: FloatArray, level: float, *, upper: bool) -> float:
    """The level whose plugged-in bound, over the bootstrap, covers the fitted distribution with chance `level`.

    For an upper bound at level a of a resample's distribution the coverage is F(q*(a)) under the fitted one; the
    average over resamples rises with a, and is solved by bisection.
    """
    low, high = 0.5, 1.0 - 1e-9
    for _ in range(40):
        middle = 1.0 - np.sqrt((1.0 - low) * (1.0 - high))
        if _coverage(drawn, plugged, middle, upper=upper) < level:
            low = middle
        else:
            high = middle
    return high


def _coverage(drawn: FloatArray, plugged: FloatArray, level: float, *, upper: bool) -> float:
    bound = (drawn < (level if upper else 1.0 - level) - 1e-12).sum(axis=1)
    bound = np.minimum(bound, plugged.size - 1)
    if upper:
        return float(plugged[bound].mean())
    return float(1.0 - np.where(bound > 0, plugged[np.maximum(bound - 1, 0)], 0.0).mean())
