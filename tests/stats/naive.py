"""Slow, plain references: loops over rows and general optimisers, sharing nothing with the code under test."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import numpy as np
from scipy import optimize

from reliability.stats.lifetimes import Lifetimes


def product_limit(lifetimes: Lifetimes) -> list[tuple[float, float, float, float, float]]:
    """(age, S, Greenwood error, at risk, failures) at each failure age, by counting."""
    lives = list(
        zip(
            lifetimes.durations.tolist(),
            lifetimes.observed.tolist(),
            lifetimes.entries.tolist(),
            lifetimes.weights.tolist(),
            strict=True,
        )
    )
    survival, spread, steps = 1.0, 0.0, []
    for age in sorted({duration for duration, observed, _, _ in lives if observed}):
        at_risk = sum(weight for duration, _, entry, weight in lives if entry < age <= duration)
        failed = sum(weight for duration, observed, _, weight in lives if observed and duration == age)
        survival *= 1.0 - failed / at_risk
        if failed < at_risk:
            spread += failed / (at_risk * (at_risk - failed))
        steps.append((age, survival, survival * math.sqrt(spread), at_risk, failed))
    return steps


def log_likelihood(lifetimes: Lifetimes, log_survival: Callable[[float], float], log_density: Any) -> float:
    """Sum over rows of the textbook log-likelihood."""
    total = 0.0
    for age, failed, entry, good, weight in zip(
        lifetimes.durations, lifetimes.observed, lifetimes.entries, lifetimes.last_good, lifetimes.weights, strict=True
    ):
        if not failed:
            term = log_survival(age)
        elif math.isnan(good):
            term = log_density(age)
        else:
            before = log_survival(good) if good > 0 else 0.0
            term = before + math.log(-math.expm1(min(log_survival(age) - before, -1e-300)))
        total += weight * (term - (log_survival(entry) if entry > 0 else 0.0))
    return total


def weibull_log_likelihood(lifetimes: Lifetimes, shape: float, scale: float) -> float:
    def log_survival(age: float) -> float:
        return -((age / scale) ** shape)

    def log_density(age: float) -> float:
        return math.log(shape / scale) + (shape - 1.0) * math.log(age / scale) + log_survival(age)

    return log_likelihood(lifetimes, log_survival, log_density)


def maximum(function: Callable[[Any], float], start: list[float]) -> tuple[np.ndarray, float]:
    """Nelder–Mead from several starts around the given one."""

    def falling(point: Any) -> float:
        try:
            value = function(point)
        except (ValueError, OverflowError):
            return 1e30
        return -value if math.isfinite(value) else 1e30

    best = None
    for shift in (-0.7, 0.0, 0.7):
        begin = np.array(start) + shift * np.eye(len(start))[0]
        options = {"xatol": 1e-10, "fatol": 1e-12, "maxiter": 20_000, "maxfev": 20_000}
        found = optimize.minimize(falling, begin, method="Nelder-Mead", options=options)
        if best is None or found.fun < best.fun:
            best = found
    return best.x, -float(best.fun)


def weibull_fit(lifetimes: Lifetimes) -> tuple[float, float, float]:
    """Shape, scale, log-likelihood."""
    start = [0.0, math.log(float(np.average(lifetimes.durations, weights=lifetimes.weights)))]
    point, value = maximum(lambda p: weibull_log_likelihood(lifetimes, math.exp(p[0]), math.exp(p[1])), start)
    return math.exp(point[0]), math.exp(point[1]), value


def weibull_profile_limits(
    lifetimes: Lifetimes, scale_for: Callable[[float, float], float], estimate: float, peak: float
) -> tuple[float, float]:
    """95 % limits of a quantity: scale_for(quantity, shape) gives the scale that holds it; bounded cases only."""

    def profile(log_quantity: float) -> float:
        def height(log_shape: float) -> float:
            shape = math.exp(log_shape)
            return -weibull_log_likelihood(lifetimes, shape, scale_for(math.exp(log_quantity), shape))

        found = optimize.minimize_scalar(height, bounds=(-2.5, 3.5), method="bounded", options={"xatol": 1e-9})
        return -found.fun - peak + 0.5 * 3.841458820694124  # the 95 % quantile of chi-square with 1 degree of freedom

    centre = math.log(estimate)
    ends = []
    for direction in (-1.0, 1.0):
        reach = 0.05
        while profile(centre + direction * reach) > 0.0:
            reach *= 1.6
        ends.append(math.exp(optimize.brentq(profile, centre, centre + direction * reach, xtol=1e-10)))
    return min(ends), max(ends)
