"""Sites, lots or modules that stand out, judged against how much their like differ, false discovery rate stated."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from reliability.stats.errors import InvalidArgument
from reliability.stats.lifetimes import FloatArray, IntArray, Lifetimes
from reliability.stats.site_likelihood import SiteLikelihood
from reliability.stats.site_quadrature import site_interval_nodes
from reliability.stats.site_spread import WeibullSiteFit, fit_weibull_with_site_spread

# even nodes in standard errors of shape and level: for anything like a normal curve their sum is exact to 1e-6
NODES = np.array([-2.4, -1.2, 0.0, 1.2, 2.4])
# where each multiplier's distribution is tabulated, in standard deviations of its log
PLACES = np.linspace(-4.0, 4.0, 25)
LEAST_SHARE = 1e-3


@dataclass(frozen=True)
class StandOut:
    """One site or lot. multiplier: its expected hazard as a multiple of a typical one's, with a credible interval.

    expected: the failures that a typical one would have had in the same lives. chance_worse: P(z > factor),
    chance_better: P(z < 1 / factor), given the records. chosen: among those named as standing out.
    """

    label: Any
    lives: float
    failures: float
    expected: float
    multiplier: float
    lower: float
    upper: float
    chance_worse: float
    chance_better: float
    chosen: bool


@dataclass(frozen=True)
class StandOuts:
    """The worst first. false_discovery_rate: the expected share of the chosen that do not exceed the factor.

    spread: posterior mean of the variance of the multipliers, against which each is judged. allowed_rate: the highest
    false discovery rate that was allowed.
    """

    rows: tuple[StandOut, ...]
    factor: float
    spread: float
    false_discovery_rate: float
    allowed_rate: float
    confidence_level: float

    @property
    def chosen(self) -> tuple[Any, ...]:
        return tuple(row.label for row in self.rows if row.chosen)


def stand_outs(
    lifetimes: Lifetimes,
    labels: ArrayLike | None = None,
    *,
    factor: float = 1.25,
    false_discovery_rate: float = 0.1,
    spread_prior: float = 1.0,
    confidence_level: float = 0.95,
) -> StandOuts:
    """Which labels have a hazard above `factor` times the typical one, any mix of rows.

    labels (n,): what is judged; None: `lifetimes.sites`. Given labels and sites both (lots), each life's hazard is
    first multiplied by its site's expected multiplier, so that a lot is not blamed for its site; a lot found at one
    site only cannot then be told from it. The multipliers z are gamma with mean 1 and a spread whose prior is
    exponential; P(z > factor) is averaged over the spread, shape and scale. Judged against Poisson instead, half of
    all sites "differ" wherever sites differ at all. The chosen are the most that keep the mean of P(z <= factor)
    within the false discovery rate. Müller, Parmigiani, Robert & Rousseau, J. Amer. Statist. Assoc. 99 (2004) 990-1001.
    Raises as `fit_weibull` with site_spread; InvalidArgument with fewer than two labels.
    """
    if not (1.0 <= factor < math.inf and 0.0 < false_discovery_rate < 1.0 and 0.0 < confidence_level < 1.0):
        raise InvalidArgument(
            f"The factor is {factor:g}, at least 1; the false discovery rate {false_discovery_rate:g} and the "
            f"confidence level {confidence_level:g}, both between 0 and 1."
        )
    judged = _labelled(lifetimes, labels, spread_prior)
    fit = fit_weibull_with_site_spread(judged, spread_prior=spread_prior)
    mixture = _mixture(fit)
    tail = 0.5 * (1.0 - confidence_level)
    limits = np.log(np.array([factor, 1.0 / factor]))
    at_limits, (lower, upper) = mixture.told(limits, (tail, 1.0 - tail))
    worse, better = 1.0 - at_limits[:, 0], at_limits[:, 1]
    order = np.argsort(-worse, kind="stable")
    chosen, rate = _chosen(worse[order], false_discovery_rate)
    codes, weights = judged.site_codes, judged.weights
    size = judged.site_labels.size
    lives = np.bincount(codes, weights=weights, minlength=size)
    failures = np.bincount(codes, weights=weights * judged.observed, minlength=size)
    expected = np.bincount(codes, weights=weights * _hazards(judged, fit), minlength=size)
    names = judged.site_labels.tolist()
    rows = tuple(
        StandOut(
            label=names[place],
            lives=float(lives[place]),
            failures=float(failures[place]),
            expected=float(expected[place]),
            multiplier=float(mixture.means[place]),
            lower=float(lower[place]),
            upper=float(upper[place]),
            chance_worse=float(worse[place]),
            chance_better=float(better[place]),
            chosen=rank < chosen,
        )
        for rank, place in enumerate(order.tolist())
    )
    return StandOuts(rows, factor, fit.spread, rate, false_discovery_rate, confidence_level)


def _labelled(lifetimes: Lifetimes, labels: ArrayLike | None, spread_prior: float) -> Lifetimes:
    if labels is None:
        if lifetimes.sites is None:
            raise InvalidArgument("Nothing is given to be judged. Give each life a label, or its site.")
        judged = lifetimes
    else:
        judged = _without_sites(lifetimes, spread_prior)
        judged = Lifetimes(
            judged.durations,
            judged.observed,
            entries=judged.entries,
            last_good=judged.last_good,
            weights=judged.weights,
            sites=labels,
        )
    if judged.site_labels.size < 2:
        raise InvalidArgument(
            f"All lives carry the label {judged.site_labels[0]}; nothing is there to compare it with. "
            "Choose lives of at least two."
        )
    return judged


def _without_sites(lifetimes: Lifetimes, spread_prior: float) -> Lifetimes:
    """The same lives with the ages at which a typical site would have the hazard: z t^shape = (z^(1/shape) t)^shape."""
    if lifetimes.sites is None or lifetimes.site_labels.size < 2:
        return lifetimes
    fit = fit_weibull_with_site_spread(lifetimes, spread_prior=spread_prior)
    multipliers = np.array([fit.site_multipliers[label] for label in lifetimes.site_labels.tolist()])
    stretch = (multipliers ** (1.0 / fit.shape))[lifetimes.site_codes]
    return Lifetimes(
        lifetimes.durations * stretch,
        lifetimes.observed,
        entries=lifetimes.entries * stretch,
        last_good=lifetimes.last_good * stretch,
        weights=lifetimes.weights,
    )


@dataclass(frozen=True, eq=False)
class _Component:
    """The multipliers given shape, level and the kept spreads: gamma (S, K), or nodes (C, K, J) with interval rows."""

    weights: FloatArray  # of the spreads, (K,)
    power: FloatArray
    rate: FloatArray
    concerned: IntArray  # sites with interval rows, (C,)
    log_nodes: FloatArray
    shares: FloatArray

    def means(self) -> tuple[FloatArray, FloatArray]:
        """Mean of z and of its square, (S,)."""
        first = self.power / self.rate
        second = first * (self.power + 1.0) / self.rate
        if self.concerned.size:
            z = np.exp(self.log_nodes)
            first[self.concerned] = (self.shares * z).sum(axis=-1)
            second[self.concerned] = (self.shares * z * z).sum(axis=-1)
        return first @ self.weights, second @ self.weights

    def below(self, logs: FloatArray) -> FloatArray:
        """P(log z <= logs), logs (S, G); shape (S, G)."""
        table = special.gammainc(self.power[..., None], self.rate[..., None] * np.exp(logs)[:, None, :])
        if self.concerned.size:
            middle = np.cumsum(self.shares, axis=-1) - 0.5 * self.shares
            for place, site in enumerate(self.concerned.tolist()):
                for node in range(self.weights.size):
                    table[site, node] = np.interp(
                        logs[site], self.log_nodes[place, node], middle[place, node], left=0.0, right=1.0
                    )
        return np.tensordot(table, self.weights, axes=([1], [0]))


@dataclass(frozen=True, eq=False)
class _Mixture:
    """Components with their shares; the mean of each multiplier and the standard deviation of its log, (S,)."""

    components: list[_Component]
    shares: FloatArray
    means: FloatArray
    deviations: FloatArray

    def below(self, logs: FloatArray) -> FloatArray:
        parts = [share * component.below(logs) for component, share in zip(self.components, self.shares, strict=True)]
        return np.sum(parts, axis=0)

    def told(self, limits: FloatArray, shares: tuple[float, ...]) -> tuple[FloatArray, list[FloatArray]]:
        """P(log z <= limits), shape (S, limits), and the quantiles of z for each share, (S,): one table for both."""
        places = np.log(self.means)[:, None] + self.deviations[:, None] * PLACES
        table = self.below(np.hstack([np.broadcast_to(limits, (self.means.size, limits.size)), places]))
        # on the normal scale the distribution is nearly a straight line in log z
        straight = special.ndtri(np.clip(table[:, limits.size :], 1e-12, 1.0 - 1e-12))
        rising = np.maximum.accumulate(straight, axis=1)
        quantiles = [
            np.exp([np.interp(float(special.ndtri(share)), row, at) for row, at in zip(rising, places, strict=True)])
            for share in shares
        ]
        return table[:, : limits.size], quantiles


def _mixture(fit: WeibullSiteFit) -> _Mixture:
    """The multipliers given the records, averaged over shape, level and spread."""
    likelihood = fit._evaluate
    assert isinstance(likelihood, SiteLikelihood)
    points = _points(fit)
    # log posterior of each point with each spread, up to one constant: (m, K)
    logs = np.array([_by_spread(likelihood, float(x), float(y)) for x, y in points])
    masses = np.exp(logs - logs.max())
    heights = masses.sum(axis=1)
    points, masses, heights = points[heights > 0.0], masses[heights > 0.0], heights[heights > 0.0]
    shares = heights / heights.sum()
    components = [
        _component(likelihood, float(x), float(y), mass / height)
        for (x, y), mass, height in zip(points, masses, heights, strict=True)
    ]
    moments = np.array([component.means() for component in components])
    means, squares = np.tensordot(shares, moments, axes=(0, 0))
    deviations = np.sqrt(np.log1p(np.maximum(squares / means**2 - 1.0, 1e-12)))
    return _Mixture(components, shares, means, deviations)


def _points(fit: WeibullSiteFit) -> FloatArray:
    """Nodes (log shape, level) around the estimate, shape (m, 2)."""
    root = np.linalg.cholesky(fit._best_covariance)
    x, y = np.meshgrid(NODES, NODES)
    near = np.hypot(x, y) < 3.0
    return np.array(fit._best) + np.stack([x[near], y[near]], axis=1) @ root.T


def _by_spread(likelihood: SiteLikelihood, log_shape: float, level: float) -> FloatArray:
    terms = likelihood.node_terms(log_shape, level)
    return likelihood.nodes.log_masses + (terms[0] if terms is not None else -np.inf)


def _component(likelihood: SiteLikelihood, log_shape: float, level: float, every: FloatArray) -> _Component:
    """every: the shares of the spreads at this point, (K,)."""
    shape = math.exp(log_shape)
    kept = np.flatnonzero(every > LEAST_SHARE)
    spreads = likelihood.nodes.spreads[kept]
    sums = likelihood.site_sums(shape, level)
    concerned, nodes, shares = np.zeros(0, dtype=np.int64), np.zeros(0), np.zeros(0)
    if likelihood.intervals is not None:
        concerned = np.flatnonzero(likelihood.intervals.concerned)
        z, shares = site_interval_nodes(likelihood.intervals, sums, shape, level, spreads)
        nodes = np.log(z)
    return _Component(
        weights=every[kept] / every[kept].sum(),
        power=sums.failures[:, None] + 1.0 / spreads,
        rate=sums.hazard[:, None] + 1.0 / spreads,
        concerned=concerned,
        log_nodes=nodes,
        shares=shares,
    )


def _chosen(worse: FloatArray, allowed: float) -> tuple[int, float]:
    """How many of the worst keep the expected share of false ones within `allowed`, and that share."""
    rates = np.cumsum(1.0 - worse) / np.arange(1, worse.size + 1)
    count = int(np.searchsorted(rates, allowed, side="right"))
    return count, float(rates[count - 1]) if count else 0.0


def _hazards(lifetimes: Lifetimes, fit: WeibullSiteFit) -> FloatArray:
    """Cumulative hazard of each life, while observed, at a typical site, (n,); of intervals to their middle."""
    middle = 0.5 * (lifetimes.durations + lifetimes.last_good)
    ends: NDArray[np.float64] = np.where(lifetimes.is_interval, middle, lifetimes.durations)
    with np.errstate(over="ignore", under="ignore"):
        return (ends / fit.scale) ** fit.shape - (lifetimes.entries / fit.scale) ** fit.shape
