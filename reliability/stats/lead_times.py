"""How long an order takes (and other durations of work): log-normal, learned from past ones and a figure given before.

log T is normal with mean m and deviation s. Prior: m normal(log figure, figure_spread); log s normal(log usual_spread,
0.6), s cut to (0.03, 1.5), so that every moment exists. An order still open says that its time is longer than what has
gone by. The posterior is a grid of (m, s) with weights; a coming duration follows the mixture (posterior predictive).
Grids: Gelman, Carlin, Stern, Dunson, Vehtari & Rubin 2013, Bayesian Data Analysis, 3rd ed., sections 2.6 and 10.1.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import log_ndtr, ndtr, ndtri_exp

from reliability.stats.errors import InvalidArgument

FloatArray = NDArray[np.float64]

FIGURE_SPREAD = 0.4  # a supplier's own figure is right within a factor of about 1.5, two times in three
UNKNOWN_FIGURE, UNKNOWN_SPREAD = 30.0, 0.8  # days, where nobody gave a figure: anything from a week to four months
USUAL_SPREAD = 0.3  # orders of one part stray from their middle by about a third
SPREAD_OF_SPREAD = 0.6
LEAST_SPREAD, MOST_SPREAD = 0.03, 1.5
SAME_DAY = 0.5  # what comes on the day of ordering took half a day

_MEANS, _SPREADS = 61, 41
_PASSES = 3
_REACH = 6.0  # grid edges in posterior deviations


@dataclass(frozen=True, eq=False)
class DurationPosterior:
    """Mixture of log-normals: means and deviations of the logarithm, weights that add up to 1, each (n,).

    completed: how many past durations (by weight) it rests on; still_open: those not ended yet. figure: what was
    given before, None where it was assumed. Durations carry the unit of the figure.
    """

    means: FloatArray
    deviations: FloatArray
    weights: FloatArray
    completed: float
    still_open: float
    figure: float | None

    @cached_property
    def median(self) -> float:
        """The duration that a coming one exceeds as often as not."""
        return self.quantile(0.5)

    @cached_property
    def mean(self) -> float:
        """Expected duration; finite because the spread is bounded."""
        return float(self.weights @ np.exp(self.means + 0.5 * self.deviations**2))

    def cdf(self, durations: ArrayLike) -> FloatArray:
        """Chance that a coming duration is at most `durations`, in their shape."""
        given = np.asarray(durations, dtype=np.float64)
        with np.errstate(divide="ignore"):
            logs = np.log(np.maximum(given, 0.0))[..., None]
        return ndtr((logs - self.means) / self.deviations) @ self.weights

    def quantile(self, p: float) -> float:
        """The duration that a coming one stays under with chance p, 0 < p < 1."""
        if not 0.0 < p < 1.0:
            raise InvalidArgument(f"p is {p:g}; it must lie between 0 and 1.")
        low = float((self.means - 40.0 * self.deviations).min())
        high = float((self.means + 40.0 * self.deviations).max())
        for _ in range(200):
            middle = 0.5 * (low + high)
            low, high = (middle, high) if float(self.cdf(math.exp(middle))) < p else (low, middle)
            if high - low < 1e-12:
                break
        return math.exp(0.5 * (low + high))

    def interval(self, level: float) -> tuple[float, float]:
        """Equal-tailed interval of a coming duration."""
        if not 0.0 < level < 1.0:
            raise InvalidArgument(f"level is {level:g}; it must lie between 0 and 1.")
        return self.quantile((1.0 - level) / 2.0), self.quantile((1.0 + level) / 2.0)

    def by_day(self, most_days: int) -> FloatArray:
        """Chances that a coming duration ends on day 0, 1 ... most_days (rounded up; day 0 never), (most_days + 1,).

        What would take longer counts to the last day, so that the chances add up to 1.
        """
        if most_days != int(most_days) or most_days < 1:
            raise InvalidArgument(f"most_days is {most_days:g}; it must be a whole number of at least 1.")
        reached = self.cdf(np.arange(int(most_days) + 1))
        reached[-1] = 1.0
        return np.diff(reached, prepend=0.0)

    def draws(self, count: int, rng: np.random.Generator, *, beyond: ArrayLike = 0.0) -> FloatArray:
        """Coming durations given that they exceed `beyond` (a number, or one a draw), (count,).

        Sampling is systematic over the grid. Far beyond anything seen the draws stay just above `beyond`.
        """
        passed = np.broadcast_to(np.asarray(beyond, dtype=np.float64), (count,))
        if not (np.isfinite(passed).all() and (passed >= 0).all()):
            raise InvalidArgument("beyond must be finite and at least 0.")
        with np.errstate(divide="ignore"):
            log_passed = np.log(passed)
        chosen = self._nodes(count, log_passed, rng)
        mean, deviation = self.means[chosen], self.deviations[chosen]
        # log of the chance to exceed `beyond`, then a uniform share of it
        log_survival = log_ndtr(-(log_passed - mean) / deviation)
        steps = -ndtri_exp(log_survival + np.log1p(-rng.random(count)))
        return np.maximum(np.exp(mean + deviation * steps), passed)

    def parameter_draws(self, count: int, rng: np.random.Generator) -> tuple[FloatArray, FloatArray]:
        """Mean and deviation of the logarithm in `count` posterior draws, each (count,), in random order."""
        chosen = rng.permutation(self._nodes(count, np.full(count, -np.inf), rng))
        return self.means[chosen], self.deviations[chosen]

    def _nodes(self, count: int, log_passed: FloatArray, rng: np.random.Generator) -> NDArray[np.int64]:
        chosen = np.empty(count, dtype=np.int64)
        for level in np.unique(log_passed):
            mine = np.flatnonzero(log_passed == level)
            log_weight = np.log(np.maximum(self.weights, 1e-300)) + log_ndtr(-(level - self.means) / self.deviations)
            weight = np.exp(log_weight - log_weight.max())
            places = (np.arange(mine.size) + rng.random()) / mine.size
            found = np.searchsorted(np.cumsum(weight) / weight.sum(), places)
            chosen[mine] = rng.permutation(np.minimum(found, self.weights.size - 1))
        return chosen


def learned_durations(
    completed: ArrayLike = (),
    *,
    still_open: ArrayLike = (),
    weights: ArrayLike | None = None,
    open_weights: ArrayLike | None = None,
    figure: float | None = None,
    figure_spread: float | None = None,
    usual_spread: float = USUAL_SPREAD,
) -> DurationPosterior:
    """Posterior of durations from past ones (n,) and what has gone by of those not ended (m,), in the figure's unit.

    weights: 0 to 1 for each, as the share of an order that a delivery brought; 1 if None. figure: the duration
    somebody gave before (the catalogue's lead time); without one 30 with a wide spread. figure_spread: deviation of
    the log of its error (0.4; 0.8 without a figure). usual_spread: middle of the prior of s. A duration of 0 counts
    as 0.5. Raises InvalidArgument.
    """
    ended, ended_weights = _durations(completed, weights, "past durations")
    gone, gone_weights = _durations(still_open, open_weights, "open durations")
    if figure is not None and not (math.isfinite(figure) and figure >= 0):
        raise InvalidArgument(f"The figure is {figure:g}; it must be a finite number of at least 0.")
    spread = figure_spread or (UNKNOWN_SPREAD if figure is None else FIGURE_SPREAD)
    if not (math.isfinite(spread) and spread > 0 and LEAST_SPREAD <= usual_spread <= MOST_SPREAD):
        raise InvalidArgument(
            f"The figure's spread is {spread:g} and the usual one {usual_spread:g}; "
            f"the first must be above 0, the second between {LEAST_SPREAD:g} and {MOST_SPREAD:g}."
        )
    centre = math.log(UNKNOWN_FIGURE if figure is None else max(figure, SAME_DAY))
    means, deviations, grid_weights = _grid(
        np.log(ended), ended_weights, np.log(gone), gone_weights, (centre, spread, usual_spread)
    )
    return DurationPosterior(
        means=means,
        deviations=deviations,
        weights=grid_weights,
        completed=float(ended_weights.sum()),
        still_open=float(gone_weights.sum()),
        figure=figure,
    )


def _durations(values: ArrayLike, weights: ArrayLike | None, name: str) -> tuple[FloatArray, FloatArray]:
    given = np.atleast_1d(np.asarray(values, dtype=np.float64))
    weight = np.ones(given.shape) if weights is None else np.atleast_1d(np.asarray(weights, dtype=np.float64))
    if given.ndim != 1 or weight.shape != given.shape:
        raise InvalidArgument(f"{name} and their weights must be lists of the same length.")
    if not (np.isfinite(given).all() and (given >= 0).all()):
        raise InvalidArgument(f"{name} must be finite and at least 0.")
    if not ((weight >= 0) & (weight <= 1)).all():
        raise InvalidArgument(f"Weights of {name} must lie between 0 and 1.")
    return np.maximum(given, SAME_DAY), weight


def _grid(
    ended: FloatArray,
    ended_weights: FloatArray,
    gone: FloatArray,
    gone_weights: FloatArray,
    prior: tuple[float, float, float],
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Nodes (n,) and weights: a wide grid of mean and log deviation, twice refined around the mass."""
    centre, spread, usual = prior
    everything = np.concatenate([ended, gone, [centre]])
    mean_range = (float(everything.min()) - _REACH * spread, float(everything.max()) + _REACH * spread)
    spread_range = (math.log(LEAST_SPREAD), math.log(MOST_SPREAD))
    # power sums make the cost of the ended ones independent of their number
    total = float(ended_weights.sum())
    first, second = float(ended_weights @ ended), float(ended_weights @ ended**2)
    for last in range(_PASSES):
        means = np.linspace(*mean_range, _MEANS)[:, None]
        logs = np.linspace(*spread_range, _SPREADS)[None, :]
        deviations = np.exp(logs)
        squares = second - 2.0 * means * first + total * means**2
        height = -total * logs - 0.5 * squares / deviations**2
        for value, weight in zip(gone, gone_weights, strict=True):
            height = height + weight * log_ndtr((means - value) / deviations)
        height = (
            height - 0.5 * ((means - centre) / spread) ** 2 - 0.5 * ((logs - math.log(usual)) / SPREAD_OF_SPREAD) ** 2
        )
        weights = np.exp(height - height.max())
        # trapezoids: where the spread is cut there may be mass at the edge
        weights[:, [0, -1]] *= 0.5
        weights /= weights.sum()
        if last < _PASSES - 1:
            mean_range = _around(means[:, 0], weights.sum(axis=1), mean_range)
            spread_range = _around(logs[0], weights.sum(axis=0), spread_range)
    kept = weights > 1e-10
    shape = weights.shape
    chosen = weights[kept]
    return np.broadcast_to(means, shape)[kept], np.broadcast_to(deviations, shape)[kept], chosen / chosen.sum()


def _around(nodes: FloatArray, weights: FloatArray, bounds: tuple[float, float]) -> tuple[float, float]:
    centre = float(weights @ nodes)
    step = float(nodes[1] - nodes[0])
    reach = _REACH * float(np.sqrt(weights @ (nodes - centre) ** 2)) + 2.0 * step
    return max(bounds[0], centre - reach), min(bounds[1], centre + reach)
