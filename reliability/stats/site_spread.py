"""Weibull lives at sites that differ: gamma multipliers on the hazard, their spread averaged over its prior."""

from __future__ import annotations

import math
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
from numpy.typing import ArrayLike
from scipy import optimize

from reliability.stats.errors import InvalidArgument, UndefinedEstimate
from reliability.stats.fitted import plain_number
from reliability.stats.lifetimes import FloatArray, Lifetimes
from reliability.stats.newton import Maximum, maximise_plane
from reliability.stats.site_likelihood import NEGLIGIBLE, SiteLikelihood, site_likelihood, spread_nodes
from reliability.stats.weibull_curves import LEVEL_LIMITS, LOG_SHAPE_LIMITS
from reliability.stats.weibull_fit import (
    LARGEST_STEP,
    START_SHAPES,
    WeibullFit,
    finite_scale,
    natural_covariance,
    parameter_covariance,
    refuse_unbounded_shape,
    refuse_unconverged,
)
from reliability.stats.weibull_likelihood import weibull_likelihood

# beyond these the sites explain everything and the shape nothing
LARGEST_SHAPE = 500.0
MOST_STEPS = 60
# shapes tried first; all of the grid only where the search from these fails
FIRST_STARTS = 3


@dataclass(frozen=True, eq=False, kw_only=True)
class WeibullSiteFit(WeibullFit):
    """Weibull of a typical site (multiplier z = 1): shape, scale, quantiles, mean, survival and their intervals.

    site_multipliers: expected hazard multiplier of each site given its records, by label; above 1 is worse.
    spread: posterior mean of the variance nu of the multipliers. For parts anywhere, sites unknown, use
    marginal_survival and marginal_quantile.
    """

    spread: float
    site_multipliers: dict[Any, float]
    _spreads: FloatArray = field(repr=False)
    _spread_shares: FloatArray = field(repr=False)

    distribution = "Weibull with site spread"
    free_parameters = 3

    def spread_interval(self, confidence_level: float = 0.95) -> tuple[float, float]:
        """Credible interval of nu, equal tails, shape and scale at their estimates."""
        if not 0.0 < confidence_level < 1.0:
            raise InvalidArgument(f"The confidence level is {confidence_level:g}; it must lie between 0 and 1.")
        below = np.cumsum(self._spread_shares) - 0.5 * self._spread_shares
        tail = 0.5 * (1.0 - confidence_level)
        low, high = np.interp([tail, 1.0 - tail], below, self._spreads)
        return float(low), float(high)

    def marginal_survival(self, age: ArrayLike) -> Any:
        """S(age) of a part at a site not known: the mean over z and nu of exp(-z H), (1 + nu H)^(-1 / nu)."""
        with np.errstate(over="ignore", under="ignore"):
            hazard = (np.asarray(age, dtype=float)[..., None] / self.scale) ** self.shape
            return plain_number(np.exp(-np.log1p(self._spreads * hazard) / self._spreads) @ self._spread_shares)

    def marginal_quantile(self, probability: float) -> float:
        """The age by which the share `probability` has failed at a site not known."""
        typical = self.quantile(probability)

        def excess(shift: float) -> float:
            return self.marginal_survival(typical * math.exp(shift)) - (1.0 - probability)

        high = 1.0
        while excess(high) > 0.0:
            high *= 2.0
        return typical * math.exp(optimize.brentq(excess, -1.0, high, xtol=1e-12))


def fit_weibull_with_site_spread(lifetimes: Lifetimes, *, spread_prior: float = 1.0) -> WeibullSiteFit:
    """Weibull of a typical site where sites differ, any mix of rows; needs `lifetimes.sites`, at least two.

    Hazards of site s are multiplied by z_s ~ Gamma with mean 1 and variance nu; nu has an exponential prior with mean
    `spread_prior`, over which the likelihood is averaged. shape and scale maximise that likelihood, and the
    likelihood-ratio intervals are taken on it: they speak of the typical site, z = 1. In simulations with 16 sites they
    held the typical site's median at their rate (see the coverage benchmark), where independent lives did not. For a
    spread between modules, or positions, give their labels as `sites`: bad ones leave more lives in the records.
    Raises InvalidArgument without two sites, UndefinedEstimate where shape and spread cannot be told apart, else as
    `fit_weibull`.
    """
    refuse_unbounded_shape(lifetimes)
    likelihood = site_likelihood(lifetimes, spread_prior)
    points = _start_points(lifetimes)
    top = _search(likelihood, _highest(likelihood, points[:FIRST_STARTS]))
    if not top.converged:
        top = _search(likelihood, _highest(likelihood, points))
    _refuse_unsettled(top)
    likelihood = _refined(likelihood, top, points[0])
    top = _search(likelihood, (float(top.point[0]), float(top.point[1])))
    _refuse_unsettled(top)
    covariance = parameter_covariance(top.hessian)
    log_shape, level = float(top.point[0]), float(top.point[1])
    shares = likelihood.spread_shares(log_shape, level)
    return WeibullSiteFit(
        shape=math.exp(log_shape),
        scale=finite_scale(likelihood.log_reference - level * math.exp(-log_shape)),
        log_likelihood=top.value,
        covariance=natural_covariance(covariance, log_shape, level, likelihood.log_reference),
        lives=lifetimes.count,
        failures=lifetimes.failures,
        iterations=top.iterations,
        spread=float(shares @ likelihood.nodes.spreads),
        site_multipliers=_by_label(lifetimes, likelihood.multipliers(log_shape, level)),
        _evaluate=likelihood,
        _best=(log_shape, level),
        _best_covariance=covariance,
        _spreads=likelihood.nodes.spreads,
        _spread_shares=shares,
    )


def _by_label(lifetimes: Lifetimes, multipliers: FloatArray) -> dict[Any, float]:
    return dict(zip(lifetimes.site_labels.tolist(), multipliers.tolist(), strict=True))


def _highest(likelihood: SiteLikelihood, points: list[tuple[float, float]]) -> tuple[float, float]:
    return max(points, key=lambda point: likelihood(*point)[0])


def _search(likelihood: SiteLikelihood, start: tuple[float, float]) -> Maximum:
    lower, upper = zip((LOG_SHAPE_LIMITS[0], math.log(LARGEST_SHAPE)), LEVEL_LIMITS, strict=True)
    return maximise_plane(likelihood, start, lower, upper, LARGEST_STEP, MOST_STEPS)


def _refuse_unsettled(top: Maximum) -> None:
    """Where each site has its own failure age, any shape fits if only the sites differ enough."""
    if top.at_limit and top.point[0] < 0.0:
        refuse_unconverged(False, True, float(top.point[0]), top.iterations)
    if not top.converged:
        raise UndefinedEstimate(
            "Shape and site spread cannot be told apart in these records: the failures of each site lie too close "
            "together. Take lives as independent, or wait for more failures."
        )


def _start_points(lifetimes: Lifetimes) -> list[tuple[float, float]]:
    """A grid of shapes, each with the level that independent lives would have; the likeliest such shape first, then
    the steeper ones: sites that differ hide a steeper shape."""
    independent = weibull_likelihood(lifetimes)
    points = [(math.log(shape), independent.best_level(shape)) for shape in START_SHAPES]
    best = int(np.argmax([independent(*point)[0] for point in points]))
    return points[best:] + points[:best]


def _refined(likelihood: SiteLikelihood, top: Maximum, alike: tuple[float, float]) -> SiteLikelihood:
    """The same with nodes of nu laid closely where the posterior is: many sites make it narrow.

    It must also hold where sites were alike, at the point of independent lives: the lower limits lie that way.
    """
    points = ((float(top.point[0]), float(top.point[1])), alike)
    at_top, at_alike = (likelihood.spread_shares(*point) for point in points)
    spreads = likelihood.nodes.spreads
    below = (at_top > math.exp(-NEGLIGIBLE)) | (at_alike > math.exp(-NEGLIGIBLE))
    low = max(int(np.flatnonzero(below)[0]) - 1, 0)
    high = min(int(np.flatnonzero(at_top > math.exp(-NEGLIGIBLE))[-1]) + 1, spreads.size - 1)
    sites = likelihood.failures.size
    step = min(0.4, math.sqrt(2.0 / sites))
    nodes = spread_nodes(likelihood.prior_mean, float(spreads[low]), float(spreads[high]), step)
    return replace(likelihood, nodes=nodes)
