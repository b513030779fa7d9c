"""Weibull distribution by maximum likelihood, with likelihood-ratio and Wald intervals."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy import special

from reliability.stats.errors import (
    InvalidArgument,
    NoSpreadInFailures,
    NotConverged,
    TooFewFailures,
    UndefinedEstimate,
)
from reliability.stats.fitted import LifeFit, Quantity, split_quantity, unknown_quantity
from reliability.stats.lifetimes import FloatArray, IntArray, Lifetimes
from reliability.stats.newton import Maximum, maximise_line, maximise_plane
from reliability.stats.profile_intervals import LOG, LOG_LOG_SURVIVAL, Curve, Interval, Scale
from reliability.stats.weibull_curves import (
    LEVEL_LIMITS,
    LOG_SHAPE_LIMITS,
    MeanCurve,
    QuantileCurve,
    ShapeCurve,
    SurvivalCurve,
)
from reliability.stats.weibull_likelihood import WeibullLikelihood, weibull_likelihood

# shapes tried before the search: from early failures to a wall
START_SHAPES = np.geomspace(0.06, 60.0, 16)
ROWS_FOR_A_START = 20_000
LARGEST_STEP = (1.0, 4.0)


@dataclass(frozen=True, eq=False, kw_only=True)
class WeibullFit(LifeFit):
    """S(t) = exp(-(t / scale)^shape); covariance of (shape, scale)."""

    shape: float
    scale: float

    distribution = "Weibull"
    parameter_names = ("shape", "scale")

    @property
    def mean(self) -> float:
        """scale Gamma(1 + 1 / shape)."""
        return mean_of(self.shape, self.scale)

    @property
    def standard_deviation(self) -> float:
        """scale sqrt(Gamma(1 + 2 / shape) - Gamma(1 + 1 / shape)^2)."""
        first, second = special.gammaln(1.0 + 1.0 / self.shape), special.gammaln(1.0 + 2.0 / self.shape)
        spread = np.sqrt(max(np.expm1(second - 2.0 * first), 0.0))
        return self.mean * float(spread)

    def _quantile(self, share: FloatArray) -> FloatArray:
        return self.scale * (-np.log1p(-share)) ** (1.0 / self.shape)

    def _survival(self, ages: FloatArray) -> FloatArray:
        with np.errstate(over="ignore", under="ignore"):
            return np.exp(-((ages / self.scale) ** self.shape))

    def _curve(self, quantity: Quantity) -> tuple[Curve, Scale, tuple[float, float] | None]:
        return weibull_curve(quantity, self._log_reference)

    @property
    def _log_reference(self) -> float:
        # the level is log hazard at the reference age: solve for the age from the fitted pair
        return float(np.log(self.scale) + self._best[1] / self.shape)


def fit_weibull(lifetimes: Lifetimes, *, site_spread: bool = False, spread_prior: float = 1.0) -> WeibullFit:
    """Maximum-likelihood Weibull for any mix of exact, withdrawn, late-entered, interval and weighted rows.

    log L = sum over lives of: exact log f(t); withdrawn log S(t); interval log(S(L) - S(R)); minus log S(entry).
    Newton on (log shape, log cumulative hazard at the mean log failure age), analytic derivatives, one vectorised pass
    an iteration; started from the best of a grid of shapes. shape has no unit, scale the unit of the durations.

    site_spread=True: hazards differ between `lifetimes.sites` by a gamma multiplier with mean 1 and a variance whose
    prior is exponential with mean spread_prior; the result is a WeibullSiteFit and speaks of a typical site.

    Raises TooFewFailures (none), NoSpreadInFailures (nothing bounds the shape from above: one failure age and no life
    beyond it), UndefinedEstimate (nothing bounds it from below), NotConverged.
    Lawless, Statistical Models and Methods for Lifetime Data (2003), chapters 3 and 5.
    """
    if site_spread:
        from reliability.stats.site_spread import fit_weibull_with_site_spread

        return fit_weibull_with_site_spread(lifetimes, spread_prior=spread_prior)
    refuse_unbounded_shape(lifetimes)
    likelihood = weibull_likelihood(lifetimes)
    top = _search(likelihood, _start_from_some(lifetimes, likelihood))
    refuse_unconverged(top.converged, top.at_limit, float(top.point[0]), top.iterations)
    covariance = parameter_covariance(top.hessian)
    log_shape, level = float(top.point[0]), float(top.point[1])
    return WeibullFit(
        shape=float(np.exp(log_shape)),
        scale=finite_scale(likelihood.log_reference - level * np.exp(-log_shape)),
        log_likelihood=top.value,
        covariance=natural_covariance(covariance, log_shape, level, likelihood.log_reference),
        lives=lifetimes.count,
        failures=lifetimes.failures,
        iterations=top.iterations,
        _evaluate=likelihood,
        _best=(log_shape, level),
        _best_covariance=covariance,
    )


def refuse_unbounded_shape(lifetimes: Lifetimes) -> None:
    """Raise where the likelihood rises for ever with the shape: one age can be the failure age of all, and no life
    outlasted it."""
    if not lifetimes.observed.any():
        raise TooFewFailures(
            f"None of {lifetimes.count:g} lives has failed, so no shape can be fitted. "
            "Assume a shape and ask for the lower bound it gives (known_shape_bounds).",
            failures=0,
            needed=1,
        )
    exact = lifetimes.durations[lifetimes.is_exact]
    interval = lifetimes.is_interval
    # good when observation began and at no later look: bounds nothing, however late that was
    seen_good = interval & (lifetimes.last_good > lifetimes.entries)
    ends = np.where(seen_good, lifetimes.last_good, np.where(lifetimes.observed, 0.0, lifetimes.durations))
    outlasted = ends.max()
    earliest, latest = float(outlasted), np.inf
    if exact.size:
        earliest, latest = max(earliest, float(exact.max())), float(exact.min())
    if interval.any():
        latest = min(latest, float(lifetimes.durations[interval].min()))
    if earliest <= latest:
        where = f"at the age {latest:g}" if earliest == latest else f"at one age between {earliest:g} and {latest:g}"
        who = "The failure" if lifetimes.failures == 1 else f"All {lifetimes.failures:g} failures"
        raise NoSpreadInFailures(
            f"{who} can lie {where} and no part is known to have outlasted it, "
            "so the shape has no upper limit. Assume a shape (fit_weibull_known_shape), or wait for more failures."
        )


def refuse_unconverged(converged: bool, at_limit: bool, log_shape: float, iterations: int) -> None:
    if at_limit and log_shape < 0.0:
        raise UndefinedEstimate(
            "The failures do not become frequent enough with age to fit a Weibull: the likelihood rises as the shape "
            "goes to 0. With late entries only, or inspections only, wait for more records or assume a shape "
            "(fit_weibull_known_shape)."
        )
    if at_limit:
        raise NoSpreadInFailures(
            "The failures lie so close together that the shape exceeds ten million. Assume a shape "
            "(fit_weibull_known_shape), or record ages more finely."
        )
    if not converged:
        raise NotConverged(
            f"The Weibull search did not settle in {iterations} steps. Assume a shape (fit_weibull_known_shape).",
            iterations=iterations,
        )


def parameter_covariance(hessian: FloatArray) -> FloatArray:
    """Inverse of the observed information. Raises UndefinedEstimate where it is singular."""
    information = -hessian
    try:
        covariance = np.linalg.inv(information)
    except np.linalg.LinAlgError:
        covariance = np.full_like(information, np.nan)
    if not (np.isfinite(covariance).all() and (np.diag(covariance) > 0.0).all()):
        raise UndefinedEstimate(
            "The records do not determine shape and scale together. Wait for more failures, or assume a shape "
            "(fit_weibull_known_shape)."
        )
    return covariance


def natural_covariance(covariance: FloatArray, log_shape: float, level: float, log_reference: float) -> FloatArray:
    """Covariance of (shape, scale) from that of (log shape, level), by the delta method (exact at the maximum)."""
    shape = np.exp(log_shape)
    scale = np.exp(log_reference - level / shape)
    jacobian = np.array([[shape, 0.0], [scale * level / shape, -scale / shape]])
    return jacobian @ covariance @ jacobian.T


def finite_scale(log_scale: float) -> float:
    if abs(log_scale) > 690.0:
        raise UndefinedEstimate(
            f"The scale would be ten to the power {log_scale / np.log(10.0):.0f}: the records say nothing about it. "
            "Wait for more failures, or assume a shape (fit_weibull_known_shape)."
        )
    return float(np.exp(log_scale))


def mean_of(shape: float, scale: float) -> float:
    """scale Gamma(1 + 1 / shape); inf where it exceeds the largest number."""
    log_mean = float(np.log(scale) + special.gammaln(1.0 + 1.0 / shape))
    return float(np.exp(log_mean)) if log_mean < 709.0 else float("inf")


def weibull_curve(
    quantity: Quantity, log_reference: float, log_shapes: tuple[float, float] = LOG_SHAPE_LIMITS
) -> tuple[Curve, Scale, tuple[float, float] | None]:
    """The curve of constant quantity, the way back from its psi, and how far psi may be searched."""
    kind, number = split_quantity(quantity)
    if kind == "shape":
        return ShapeCurve(), LOG, log_shapes
    if kind == "scale":
        return QuantileCurve(log_reference=log_reference, free_limits=log_shapes, log_hazard=0.0), LOG, None
    if kind == "mean":
        return MeanCurve(log_reference=log_reference, free_limits=log_shapes), LOG, None
    if kind == "quantile":
        log_hazard = math.log(-math.log1p(-number))
        return QuantileCurve(log_reference=log_reference, free_limits=log_shapes, log_hazard=log_hazard), LOG, None
    if kind == "survival":
        curve = SurvivalCurve(log_reference=log_reference, free_limits=log_shapes, log_age=math.log(number))
        return curve, LOG_LOG_SURVIVAL, None
    raise unknown_quantity(quantity)


def start_point(likelihood: WeibullLikelihood) -> tuple[float, float]:
    """The best of a grid of shapes, each with its best level: near the highest top where there are several."""
    # interval rows cost several times as much each, and Newton climbs well from twice as far
    shapes = START_SHAPES if likelihood.intervals is None else START_SHAPES[::2]
    points = [(math.log(shape), likelihood.best_level(shape)) for shape in shapes]
    return max(points, key=lambda point: likelihood(*point)[0])


def _search(likelihood: WeibullLikelihood, start: tuple[float, float]) -> Maximum:
    lower, upper = zip(LOG_SHAPE_LIMITS, LEVEL_LIMITS, strict=True)
    return maximise_plane(likelihood, start, lower, upper, LARGEST_STEP)


def _start_from_some(lifetimes: Lifetimes, likelihood: WeibullLikelihood) -> tuple[float, float]:
    """Start for the search; for very many distinct rows from a fit to some of them, which saves passes over all."""
    if likelihood.log_ages.size <= 2 * ROWS_FOR_A_START:
        return start_point(likelihood)
    preliminary = weibull_likelihood(lifetimes.subset(_spread_rows(lifetimes)))
    log_shape = float(_search(preliminary, start_point(preliminary)).point[0])
    return log_shape, likelihood.best_level(math.exp(log_shape))


def _spread_rows(lifetimes: Lifetimes) -> IntArray:
    """Row numbers of an even share of the failures and of the others."""
    failed, others = np.flatnonzero(lifetimes.observed), np.flatnonzero(~lifetimes.observed)
    share = max(1, len(lifetimes) // ROWS_FOR_A_START)
    failed_share = max(1, min(share, failed.size // 200))
    return np.concatenate([failed[::failed_share], others[::share]])


@dataclass(frozen=True, eq=False, kw_only=True)
class WeibullKnownShapeFit(WeibullFit):
    """A Weibull whose shape was assumed: only the scale is estimated, and intervals speak of the scale alone.

    covariance has zeros for the shape. The interval of "shape" is the assumed value itself.
    """

    free_parameters = 1

    def interval(
        self, quantity: Quantity, confidence_level: float = 0.95, method: str = "likelihood-ratio"
    ) -> Interval:
        """As `LifeFit.interval`, the shape held at its assumed value."""
        if split_quantity(quantity)[0] == "shape":
            return Interval(quantity, self.shape, self.shape, self.shape, confidence_level, "assumed")
        return super().interval(quantity, confidence_level, method)

    def _curve(self, quantity: Quantity) -> tuple[Curve, Scale, tuple[float, float] | None]:
        return weibull_curve(quantity, self._log_reference, (self._best[0], self._best[0]))


def fit_weibull_known_shape(lifetimes: Lifetimes, shape: float) -> WeibullKnownShapeFit:
    """Maximum-likelihood scale for an assumed shape, any mix of rows.

    Without intervals scale = (A / D)^(1 / shape), A = sum (t^shape - entry^shape), D failures.
    Raises TooFewFailures without a failure (few_failures.known_shape_bounds then gives the lower bound).
    """
    if not (np.isfinite(shape) and shape > 0.0):
        raise InvalidArgument(f"The shape is {shape:g}; it must be a number above 0.")
    if not lifetimes.observed.any():
        raise TooFewFailures(
            f"None of {lifetimes.count:g} lives has failed, so the scale has no upper limit. "
            "Ask for the lower bound instead (known_shape_bounds).",
            failures=0,
            needed=1,
        )
    likelihood = weibull_likelihood(lifetimes)
    log_shape = math.log(shape)

    def along(level: float) -> tuple[float, float, float]:
        value, _, slope, _, _, bend = likelihood(log_shape, level)
        return value, slope, bend

    level, value = maximise_line(along, likelihood.best_level(shape), *LEVEL_LIMITS, LARGEST_STEP[1])
    _, slope, bend = along(level)
    if not bend < 0.0 or abs(slope) > 1e-5 * math.sqrt(-bend):
        raise UndefinedEstimate(
            "The records do not bound the scale: no part is known to have outlived any age. Wait for more records, or "
            "enter the ages at which parts were last known good."
        )
    covariance = np.array([[0.0, 0.0], [0.0, -1.0 / bend]])
    return WeibullKnownShapeFit(
        shape=float(shape),
        scale=finite_scale(likelihood.log_reference - level / shape),
        log_likelihood=value,
        covariance=natural_covariance(covariance, log_shape, level, likelihood.log_reference),
        lives=lifetimes.count,
        failures=lifetimes.failures,
        iterations=1,
        _evaluate=likelihood,
        _best=(log_shape, level),
        _best_covariance=covariance,
    )
