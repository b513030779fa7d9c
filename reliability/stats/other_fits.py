"""Lognormal and exponential distributions by maximum likelihood, and the table that compares fits of the same lives."""

from __future__ import annotations

import math
from dataclasses import dataclass, fields

import numpy as np
from scipy import special

from reliability.stats.errors import NotConverged, UndefinedEstimate
from reliability.stats.fitted import Comparison, LifeFit, Quantity, compare_fits, split_quantity, unknown_quantity
from reliability.stats.lifetimes import FloatArray, Lifetimes
from reliability.stats.lognormal_likelihood import LognormalLikelihood, lognormal_likelihood
from reliability.stats.newton import maximise_line, maximise_plane
from reliability.stats.profile_intervals import LOG, Curve, CurvePoint, Scale
from reliability.stats.weibull_curves import QuantileCurve, ShapeCurve, SurvivalCurve
from reliability.stats.weibull_fit import (
    WeibullKnownShapeFit,
    finite_scale,
    fit_weibull_known_shape,
    parameter_covariance,
    refuse_unbounded_shape,
)

__all__ = ["Comparison", "ExponentialFit", "LognormalFit", "compare_fits", "fit_exponential", "fit_lognormal"]

LOG_STEEPNESS_LIMITS = (math.log(1e-3), math.log(1e7))
# failures sixty standard deviations out mean that only the far tail is seen: with late entries alone the likelihood
# may rise for ever that way, towards a power law
LARGEST_LEVEL = 60.0
START_STEEPNESS = (0.1, 0.3, 1.0, 3.0, 10.0, 30.0)
INVERSE_ROOT_TWO_PI = 1.0 / math.sqrt(2.0 * math.pi)

SIGMA = Scale(
    back=lambda psi: math.exp(-psi), slope=lambda psi: math.exp(-psi), lowest=0.0, highest=math.inf, falling=True
)
NORMAL_SURVIVAL = Scale(
    back=lambda psi: float(special.ndtr(-psi)),
    slope=lambda psi: INVERSE_ROOT_TWO_PI * math.exp(-0.5 * psi * psi),
    lowest=0.0,
    highest=1.0,
    falling=True,
)


@dataclass(frozen=True, eq=False, kw_only=True)
class ExponentialFit(WeibullKnownShapeFit):
    """S(t) = exp(-t / scale): a Weibull whose shape is 1; the scale is the mean life."""

    distribution = "exponential"


def fit_exponential(lifetimes: Lifetimes) -> ExponentialFit:
    """Maximum-likelihood mean life of parts that do not wear, any mix of rows; without intervals exposure / failures.

    Raises TooFewFailures without a failure. Lawless, Statistical Models and Methods for Lifetime Data (2003), ch. 4.
    """
    fit = fit_weibull_known_shape(lifetimes, 1.0)
    return ExponentialFit(**{field.name: getattr(fit, field.name) for field in fields(fit)})


@dataclass(frozen=True, eq=False, kw_only=True)
class LognormalFit(LifeFit):
    """log T is normal with mean mu = log scale and standard deviation sigma = shape; covariance of (shape, scale)."""

    shape: float
    scale: float

    distribution = "lognormal"
    parameter_names = ("shape", "scale")

    @property
    def mu(self) -> float:
        return math.log(self.scale)

    @property
    def sigma(self) -> float:
        return self.shape

    @property
    def mean(self) -> float:
        """exp(mu + sigma^2 / 2); inf where it exceeds the largest number."""
        log_mean = self.mu + 0.5 * self.sigma**2
        return math.exp(log_mean) if log_mean < 709.0 else math.inf

    def _quantile(self, share: FloatArray) -> FloatArray:
        return self.scale * np.exp(self.shape * special.ndtri(share))

    def _survival(self, ages: FloatArray) -> FloatArray:
        with np.errstate(divide="ignore"):
            return special.ndtr((self.mu - np.log(ages)) / self.shape)

    def _curve(self, quantity: Quantity) -> tuple[Curve, Scale, tuple[float, float] | None]:
        kind, number = split_quantity(quantity)
        # the level is z at the reference age: solve for the age from the fitted pair
        log_reference, limits = self.mu + self._best[1] * self.shape, LOG_STEEPNESS_LIMITS
        if kind == "shape":
            return ShapeCurve(), SIGMA, LOG_STEEPNESS_LIMITS
        if kind == "scale":
            return QuantileCurve(log_reference=log_reference, free_limits=limits, log_hazard=0.0), LOG, None
        if kind == "mean":
            return LognormalMeanCurve(log_reference=log_reference, free_limits=limits), LOG, None
        if kind == "quantile":
            deviate = float(special.ndtri(number))
            return QuantileCurve(log_reference=log_reference, free_limits=limits, log_hazard=deviate), LOG, None
        if kind == "survival":
            curve = SurvivalCurve(log_reference=log_reference, free_limits=limits, log_age=math.log(number))
            return curve, NORMAL_SURVIVAL, None
        raise unknown_quantity(quantity)


@dataclass(frozen=True, kw_only=True)
class LognormalMeanCurve:
    """psi = log mean = mu + sigma^2 / 2: level = -steepness (psi - log reference) + 1 / (2 steepness)."""

    log_reference: float
    free_limits: tuple[float, float] = LOG_STEEPNESS_LIMITS

    def free_of(self, log_steepness: float, level: float) -> float:
        return log_steepness

    def value_of(self, log_steepness: float, level: float) -> float:
        sigma = math.exp(-log_steepness)
        return self.log_reference - level * sigma + 0.5 * sigma * sigma

    def gradient_of(self, log_steepness: float, level: float) -> tuple[float, float]:
        sigma = math.exp(-log_steepness)
        return level * sigma - sigma * sigma, -sigma

    def at(self, psi: float, free: float) -> CurvePoint:
        steepness = math.exp(free)
        straight, half = -steepness * (psi - self.log_reference), 0.5 / steepness
        return free, straight + half, 1.0, straight - half, 0.0, straight + half, 0.0, -steepness, -steepness


def fit_lognormal(lifetimes: Lifetimes) -> LognormalFit:
    """Maximum-likelihood lognormal for any mix of exact, withdrawn, late-entered, interval and weighted rows.

    shape is the standard deviation of log age (no unit), scale the median in the unit of the durations.
    Errors as `fit_weibull`. Lawless, Statistical Models and Methods for Lifetime Data (2003), chapter 5.
    """
    refuse_unbounded_shape(lifetimes)
    likelihood = lognormal_likelihood(lifetimes)
    lower, upper = zip(LOG_STEEPNESS_LIMITS, (-LARGEST_LEVEL, LARGEST_LEVEL), strict=True)
    top = maximise_plane(likelihood, _start_point(likelihood), lower, upper, (1.0, 4.0))
    log_steepness, level = float(top.point[0]), float(top.point[1])
    if top.at_limit:
        raise UndefinedEstimate(
            "The records do not bound the spread of a lognormal. "
            "Wait for more failures, or use the non-parametric curve."
        )
    if not top.converged:
        raise NotConverged(
            f"The lognormal search did not settle in {top.iterations} steps. Use the non-parametric curve.",
            iterations=top.iterations,
        )
    covariance = parameter_covariance(top.hessian)
    sigma = math.exp(-log_steepness)
    scale = finite_scale(likelihood.log_reference - level * sigma)
    jacobian = np.array([[-sigma, 0.0], [scale * level * sigma, -scale * sigma]])
    return LognormalFit(
        shape=sigma,
        scale=scale,
        log_likelihood=top.value,
        covariance=jacobian @ covariance @ jacobian.T,
        lives=lifetimes.count,
        failures=lifetimes.failures,
        iterations=top.iterations,
        _evaluate=likelihood,
        _best=(log_steepness, level),
        _best_covariance=covariance,
    )


def _start_point(likelihood: LognormalLikelihood) -> tuple[float, float]:
    """The best of a few steepnesses, each with its best level: for a fixed one the likelihood has a single top."""
    best = (-math.inf, 0.0, 0.0)
    for steepness in START_STEEPNESS:
        log_steepness = math.log(steepness)

        def along(level: float, log_steepness: float = log_steepness) -> tuple[float, float, float]:
            value, _, slope, _, _, bend = likelihood(log_steepness, level)
            return value, slope, bend

        level, value = maximise_line(along, 0.0, -LARGEST_LEVEL / 2.0, LARGEST_LEVEL / 2.0, 3.0)
        best = max(best, (value, log_steepness, level))
    return best[1], best[2]
