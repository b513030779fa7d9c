"""Posterior of Weibull lives on an adaptive grid, for counting failures to come (never for bounds of a life).

Likelihood of the rows with hazard level = scale^-shape and site factor z_s (mean 1, variance nu):
observed log f(t), withdrawn log S(t), interval log(S(L) - S(R)), each less log S(entry). For exact rows the site
factors integrate in closed form (gamma frailty shared by a site: Klein & Moeschberger 2003, Survival Analysis, ch.
13); interval rows are corrected by quadrature over z.

Prior: log shape normal; level (t_ref / scale)^(shape / 2) on a flat log scale, t_ref the greatest age at risk (half a
failure's worth of knowledge); nu exponential. The grid is (log shape, log of the expected failures in the records,
log nu): the second axis stays centred on the mass however shape and scale are correlated.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property
from math import log
from typing import Any

import numpy as np
from numpy.typing import NDArray

from reliability.stats.errors import InvalidArgument
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.posterior_draws import PosteriorDraws, site_columns
from reliability.stats.posterior_grid import refocused, resized, systematic, walk
from reliability.stats.posterior_likelihood import SiteSums, log_likelihood

FloatArray = NDArray[np.float64]

# shapes beyond 40 and below 0.05 belong to no part, powers would overflow; the level is widened as far as it must be
_LIMITS = ((log(0.05), log(40.0)), (-np.inf, np.inf), (log(1e-3), log(1e3)))
_COARSE = (17, 15, 7)
_FINE = (23, 21, 15)


@dataclass(frozen=True, eq=False)
class WeibullPosterior:
    """Grid posterior: points (n,) of log shape, log level (-shape log scale), log spread and their weights, sum 1.

    log spread is -inf where no spread between sites was asked for.
    """

    log_shape: FloatArray
    log_level: FloatArray
    log_spread: FloatArray
    weight: FloatArray
    lifetimes: Lifetimes = field(repr=False)
    spread_step: float = 0.0
    evidence: float = 0.0  # log, up to the improper level prior: for comparison only
    early_until: float = 0.0
    early_counts: tuple[float, float] = (0.0, 0.0)

    @cached_property
    def has_spread(self) -> bool:
        """True where sites differ."""
        return bool(np.isfinite(self.log_spread).any())

    @property
    def failures(self) -> float:
        """Failures the posterior has seen."""
        return self.lifetimes.failures

    def draws(self, count: int = 400, rng: np.random.Generator | None = None) -> PosteriorDraws:
        """Systematic sample of the sorted grid (one uniform start), points jittered within their cells."""
        if count < 1:
            raise InvalidArgument(f"count is {count}; it must be at least 1.")
        rng = np.random.default_rng() if rng is None else rng
        chosen = systematic(self.weight, count, rng)
        shapes = np.exp(self.log_shape[chosen])
        levels = self.log_level[chosen]
        # the spread's axis is coarse: spread the points over their cells
        spreads = np.exp(self.log_spread[chosen] + self.spread_step * (rng.random(count) - 0.5))
        return PosteriorDraws(
            shapes=shapes,
            scales=np.exp(-levels / shapes),
            spreads=spreads,
            multipliers=self._site_draws(shapes, levels, spreads, rng),
            early_shares=self.early_draws(count, rng),
            early_until=self.early_until,
            _new_site_generator=rng.spawn(1)[0],
        )

    def _site_draws(
        self, shapes: FloatArray, levels: FloatArray, spreads: FloatArray, rng: np.random.Generator
    ) -> dict[Any, FloatArray]:
        if not self.has_spread:
            return {}
        sums = SiteSums.from_lifetimes(self.lifetimes)
        return site_columns(self.lifetimes, sums.draw_sites(shapes, levels, spreads, rng))

    def early_draws(self, count: int, rng: np.random.Generator) -> FloatArray:
        """Draws of the share that fails early, (count,)."""
        failed, survived = self.early_counts
        if self.early_until == 0:
            return np.zeros(count)
        # Jeffreys' prior for a share; shuffled so that it does not follow the sorted grid
        return rng.beta(failed + 0.5, survived + 0.5, count)


@dataclass(frozen=True, eq=False)
class KnownWeibull:
    """A life taken as known: every draw has this shape and scale, and sites spread with variance `spread`."""

    shape: float
    scale: float
    spread: float = 0.0
    failures: float = np.inf

    @property
    def has_spread(self) -> bool:
        """True where sites differ."""
        return self.spread > 0

    def draws(self, count: int = 400, rng: np.random.Generator | None = None) -> PosteriorDraws:
        """The same parameters `count` times; site factors are drawn."""
        rng = np.random.default_rng() if rng is None else rng
        return PosteriorDraws(
            shapes=np.full(count, float(self.shape)),
            scales=np.full(count, float(self.scale)),
            spreads=np.full(count, float(self.spread)),
            multipliers={},
            early_shares=np.zeros(count),
            _new_site_generator=rng.spawn(1)[0],
        )


def weibull_posterior(
    lifetimes: Lifetimes,
    *,
    site_spread: bool = False,
    log_shape_prior: tuple[float, float] = (log(2.0), 1.0),
    spread_prior: float = 1.0,
    early_until: float | None = None,
    rounded_up_to: float = 0.0,
) -> WeibullPosterior:
    """Posterior of shape, scale and (with site_spread) the variance nu of site factors, as weighted grid points.

    log_shape_prior: mean and standard deviation of log shape. spread_prior: mean of the exponential prior on nu.
    early_until: lives are split at this age: a share fails before it (its own binomial), the rest is Weibull given
    survival to it; looked for in the records if None (`early_window`), 0 means one Weibull. rounded_up_to: the unit
    that ages at failure were rounded up to (1 for whole days), see `unrounded`. Raises InvalidArgument for a prior
    outside its domain.
    """
    if not (log_shape_prior[1] > 0 and spread_prior > 0 and (early_until or 0.0) >= 0):
        raise InvalidArgument("The prior's standard deviation and mean spread must be above 0, early_until at least 0.")
    lifetimes = unrounded(lifetimes, rounded_up_to)
    if early_until is None:
        # weighs posteriors itself
        from reliability.stats.early_failures import early_window

        early_until = early_window(lifetimes)
    early_counts = (0.0, 0.0)
    if early_until:
        lifetimes, early_counts = split_early(lifetimes, early_until)
    sums = SiteSums.from_lifetimes(lifetimes, by_site=site_spread)
    axes, weights = _settled_grid(sums, log_shape_prior, spread_prior, site_spread)
    return _sorted_points(sums, axes, weights, lifetimes, early_until, early_counts)


def log_evidence(lifetimes: Lifetimes, *, log_shape_prior: tuple[float, float] = (log(2.0), 1.0)) -> float:
    """Log of the marginal likelihood of one Weibull without spread between sites (level prior improper: compare
    only).
    """
    exact = lifetimes.is_exact
    ages = float(lifetimes.weights[exact] @ np.log(lifetimes.durations[exact]))
    evidence = weibull_posterior(lifetimes, log_shape_prior=log_shape_prior, early_until=0.0).evidence
    return evidence - ages - log(log_shape_prior[1])


def _settled_grid(
    sums: SiteSums, log_shape_prior: tuple[float, float], spread_prior: float, site_spread: bool
) -> tuple[list[FloatArray], FloatArray]:
    """Axes that hold the mass, and the log-weights on them."""
    axes = _starting_axes(sums, log_shape_prior, spread_prior, site_spread)
    for _ in range(12):
        weights = _log_weights(sums, axes, log_shape_prior, spread_prior)
        axes, settled = refocused(axes, weights, _LIMITS)
        if settled:
            break
    axes = [resized(axis, size) for axis, size in zip(axes, _FINE, strict=True)]
    return axes, _log_weights(sums, axes, log_shape_prior, spread_prior)


def unrounded(lifetimes: Lifetimes, unit: float) -> Lifetimes:
    """The lives with half a unit taken off exact ages at failure, which were rounded up; withdrawals are whole units
    done.

    Left as they are, a large fleet of wearing parts is forecast almost one per cent too low at a life of eighty days.
    """
    if unit < 0:
        raise InvalidArgument(f"Ages cannot be rounded up to {unit:g}; give the unit, or 0 where they are not rounded.")
    if unit == 0:
        return lifetimes
    exact = lifetimes.is_exact
    middle = np.maximum(lifetimes.durations - 0.5 * unit, 0.5 * np.minimum(unit, lifetimes.durations))
    # a life entered within its last unit keeps its age
    room = exact & (middle > lifetimes.entries)
    return Lifetimes(
        np.where(room, middle, lifetimes.durations),
        lifetimes.observed,
        entries=lifetimes.entries,
        last_good=lifetimes.last_good,
        weights=lifetimes.weights,
        sites=lifetimes.sites,
        groups=lifetimes.groups,
    )


def split_early(lifetimes: Lifetimes, until: float) -> tuple[Lifetimes, tuple[float, float]]:
    """Lives beyond the age `until` (entering there at the earliest), and (failed, survived) among those seen from
    new.
    """
    early = lifetimes.durations <= until
    from_new = lifetimes.entries == 0
    failed = float(lifetimes.weights[early & lifetimes.observed & from_new].sum())
    # one that was taken out, or still runs, within the window survived its share of it
    share = np.minimum(lifetimes.durations / until, 1.0)
    survived = float((lifetimes.weights * share)[from_new & ~(early & lifetimes.observed)].sum())
    if not (~early).any():
        raise InvalidArgument(f"No life reached the age {until:g} at which early failures are set apart.")
    rest = lifetimes.subset(~early)
    late = Lifetimes(
        rest.durations,
        rest.observed,
        entries=np.maximum(rest.entries, until),
        last_good=np.where(rest.last_good < until, until, rest.last_good),
        weights=rest.weights,
        sites=rest.sites,
        groups=rest.groups,
    )
    return late, (failed, survived)


def _starting_axes(
    sums: SiteSums, log_shape_prior: tuple[float, float], spread_prior: float, site_spread: bool
) -> list[FloatArray]:
    centre, deviation = log_shape_prior
    wide = max(4.0 * deviation, 0.7)
    low, high = max(centre - wide, _LIMITS[0][0]), min(centre + wide, _LIMITS[0][1])
    # expected failures from a hundredth to a hundred times those seen
    levels = np.linspace(-log(100.0), log(100.0), _COARSE[1])
    spreads = np.linspace(log(1e-3), log(10.0 * spread_prior), _COARSE[2]) if site_spread else np.array([-np.inf])
    return [np.linspace(low, high, _COARSE[0]), levels, spreads]


def _log_weights(
    sums: SiteSums, axes: list[FloatArray], log_shape_prior: tuple[float, float], spread_prior: float
) -> FloatArray:
    """Log of prior times likelihood times cell volume at the grid, shape (shapes, levels, spreads)."""
    log_shape, offset, log_spread = axes
    shape = np.exp(log_shape)
    level = sums.centred_levels(shape, offset)
    logs = log_likelihood(sums, shape, level, np.exp(log_spread))
    centre, deviation = log_shape_prior
    prior = -0.5 * ((log_shape - centre) / deviation) ** 2
    # d log scale = d log level / shape
    logs = (
        logs + (prior - log_shape)[:, None, None] + (0.5 * (level + shape[:, None] * sums.log_greatest_age))[..., None]
    )
    if log_spread.size > 1:
        logs = logs + (log_spread - np.exp(log_spread) / spread_prior)[None, None, :]
    return np.where(np.isfinite(logs), logs, -np.inf)


def _sorted_points(
    sums: SiteSums,
    axes: list[FloatArray],
    logs: FloatArray,
    lifetimes: Lifetimes,
    early_until: float,
    early_counts: tuple[float, float],
) -> WeibullPosterior:
    log_shape, offset, log_spread = axes
    weight = np.exp(logs - logs.max())
    level = sums.centred_levels(np.exp(log_shape), offset)
    points = [
        np.broadcast_to(log_shape[:, None, None], weight.shape),
        np.broadcast_to(level[:, :, None], weight.shape),
        np.broadcast_to(log_spread[None, None, :], weight.shape),
    ]
    order = walk(weight.shape)
    kept = order[weight.ravel()[order] > 1e-7]
    flat = weight.ravel()[kept]
    return WeibullPosterior(
        *(point.ravel()[kept] for point in points),
        weight=flat / flat.sum(),
        lifetimes=lifetimes,
        evidence=float(logs.max() + np.log(weight.sum()) + sum(np.log(a[1] - a[0]) for a in axes if a.size > 1)),
        spread_step=float(log_spread[1] - log_spread[0]) if log_spread.size > 1 else 0.0,
        early_until=early_until,
        early_counts=early_counts,
    )
