"""Pointwise likelihood-ratio band of a fitted Weibull line, all ages at the price of one walk round the region."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike

from reliability.stats.errors import InvalidArgument
from reliability.stats.lifetimes import FloatArray
from reliability.stats.profile_intervals import normal_quantile
from reliability.stats.weibull_fit import WeibullFit

DIRECTIONS = 32  # between them the extremes are taken from a parabola
FARTHEST = 40.0  # in standard deviations: the region is called open in a direction in which it reaches this far
TOLERANCE = 1e-3
MOST_STEPS = 60


def weibull_band(fit: WeibullFit, ages: ArrayLike, confidence_level: float = 0.95) -> tuple[FloatArray, FloatArray]:
    """Lower and upper limit of S(age), shapes as the ages: each the likelihood-ratio interval of one survival.

    The interval of any function of the parameters is its range over the region
    {log L >= log L max - chi2(confidence; 1) / 2}. S rises or falls everywhere, so its extremes lie on the edge, which
    is found along rays from the estimate, once for all ages. Equal to `fit.interval(("survival", age))` up to the
    number of rays. Meeker & Escobar, Statistical Methods for Reliability Data (1998), section 8.3.
    Raises InvalidArgument for an age that is not above 0.
    """
    given = np.asarray(ages, dtype=float)
    if not (given > 0.0).all():
        raise InvalidArgument("An age of the band is 0 or less; ask for ages above 0.")
    edge = region_edge(fit, confidence_level)
    away = np.log(given)[..., None] - fit._log_reference
    with np.errstate(over="ignore", under="ignore"):
        log_hazards = edge[:, 1] + np.exp(edge[:, 0]) * away
        lower = np.exp(-np.exp(np.minimum(_highest(log_hazards), 700.0)))
        upper = np.exp(-np.exp(np.minimum(-_highest(-log_hazards), 700.0)))
    return lower, upper


def _highest(values: FloatArray) -> FloatArray:
    """The top of a closed curve given at equally spaced angles (last axis): of a parabola through its highest three."""
    place = values.argmax(axis=-1)[..., None]
    before, here, after = (
        np.take_along_axis(values, (place + step) % values.shape[-1], axis=-1)[..., 0] for step in (-1, 0, 1)
    )
    bend = before - 2.0 * here + after
    with np.errstate(invalid="ignore", divide="ignore", over="ignore"):
        top = here - (after - before) ** 2 / (8.0 * bend)
    return np.where(np.isfinite(top) & (bend < 0.0), top, here)


def region_edge(fit: WeibullFit, confidence_level: float) -> FloatArray:
    """Points (log shape, level) on the edge of the likelihood-ratio region, shape (DIRECTIONS, 2)."""
    fall = normal_quantile(confidence_level) ** 2 / 2.0
    root = np.linalg.cholesky(fit._best_covariance)
    best = np.array(fit._best)
    angles = np.arange(DIRECTIONS) * (2.0 * math.pi / DIRECTIONS)
    rays = np.stack([np.cos(angles), np.sin(angles)], axis=1) @ root.T
    return best + np.array([_reach(fit, ray, fall) for ray in rays])[:, None] * rays


def _reach(fit: WeibullFit, ray: FloatArray, fall: float) -> float:
    """How far along the ray the log-likelihood has fallen by `fall`; Newton kept inside a bracket."""
    x, y = fit._best
    top = fit._evaluate(x, y)[0]
    low, high, distance = 0.0, FARTHEST, math.sqrt(2.0 * fall)
    for _ in range(MOST_STEPS):
        value, by_shape, by_level, *_ = fit._evaluate(x + distance * ray[0], y + distance * ray[1])
        excess = top - value - fall
        if abs(excess) < TOLERANCE * fall:
            return distance
        low, high = (distance, high) if excess < 0.0 else (low, distance)
        if high - low < 1e-6 or low >= FARTHEST * (1.0 - 1e-6):
            break
        slope = -(by_shape * ray[0] + by_level * ray[1])
        step = distance - excess / slope if math.isfinite(value) and slope > 0.0 else math.nan
        distance = step if low < step < high else 0.5 * (low + high)
    return distance
