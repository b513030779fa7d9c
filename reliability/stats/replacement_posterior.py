"""Age replacement when the life is not known exactly: the cost rate of each age over draws from the posterior.

The best age is the one with the least expected cost rate over the draws (the decision of a manager who pays the same
for every unit of money); its band is that of the best ages of the single draws. Cost rates of several sites are
averaged over their positions, each with its own factor on the hazard. Formula: see `replacement`.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from math import inf, isfinite
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import log_ndtr

from reliability.stats.errors import InvalidArgument
from reliability.stats.posterior_draws import PosteriorDraws
from reliability.stats.replacement_visits import check_costs, visit_cost_rates

FloatArray = NDArray[np.float64]

AGES = 240
VISIT_AGES, VISIT_ROWS = 40, 1200  # what is tried where only visits replace: each costs a small system of equations
_TAIL = 30.0  # a life is over when its cumulative hazard is so high
_TAIL_POINTS = 500


@dataclass(frozen=True, eq=False)
class ReplacementCosts:
    """Expected cost rates for each unit of time: `cost_rate` at the best `age`, `never` that of failures alone, and the
    `curve` with its band `lower`, `upper` at `ages`, each (n,).

    age inf: none is expected to cost less than never. age_lower, age_upper: band of the draws' own best ages (inf:
    never). saving: share of the cost of failures alone that the best age saves, expected, with band. chance: share of
    the draws in which it saves anything. flat: least and greatest age that cost within `flat_within` of the
    best.
    """

    age: float
    cost_rate: float
    ages: FloatArray
    curve: FloatArray
    lower: FloatArray
    upper: FloatArray
    never: float
    never_band: tuple[float, float]
    age_lower: float
    age_upper: float
    saving: float
    saving_band: tuple[float, float]
    chance: float
    flat: tuple[float, float]
    flat_within: float
    level: float

    @property
    def pays(self) -> bool:
        """Whether the saving is shown: it is above 0 at the lower end of its band."""
        return isfinite(self.age) and self.saving_band[0] > 0


def replacement_costs(
    draws: PosteriorDraws,
    planned_cost: float,
    failure_cost: float,
    *,
    sites: Mapping[Any, float] | None = None,
    ages: ArrayLike | None = None,
    visit_interval: float | None = None,
    level: float = 0.95,
    flat_within: float = 0.03,
) -> ReplacementCosts:
    """Cost rates over the draws and the best age of all.

    sites: positions at each site (its label), for draws whose sites differ; None: a site like the average.
    ages: increasing, above 0; chosen up to where 98 in 100 have failed (or four median lives) if None.
    visit_interval: planned replacement only at visits so far apart, see `replacement_visits`.
    Raises InvalidArgument.
    """
    check_costs(planned_cost, failure_cost)
    if not 0 < level < 1:
        raise InvalidArgument(f"level is {level:g}; it must lie between 0 and 1.")
    if visit_interval is not None and not (isfinite(visit_interval) and visit_interval > 0):
        raise InvalidArgument(f"visit_interval is {visit_interval:g}; it must be above 0.")
    lives = _Lives(draws, sites)
    tried = lives.ages() if ages is None else np.asarray(ages, dtype=np.float64)
    if tried.ndim != 1 or tried.size < 2 or not (tried > 0).all() or not (np.diff(tried) > 0).all():
        raise InvalidArgument("ages must increase and be above 0; give two at least.")
    never = lives.averaged(failure_cost / lives.mean_life())
    if visit_interval is None:
        rates = lives.averaged(_rates(lives, tried, planned_cost, failure_cost))
    else:
        tried = tried[:: max(1, tried.size // VISIT_AGES)]
        lives = lives.thinned(VISIT_ROWS)
        never = lives.averaged(failure_cost / lives.mean_life())
        found = visit_cost_rates(lives.flat_survival, tried, planned_cost, failure_cost, visit_interval)
        rates = lives.averaged(found.reshape(*lives.scale.shape, tried.size))
    return _told(tried, rates, never, failure_cost > planned_cost, level, flat_within)


def _told(
    ages: FloatArray, rates: FloatArray, never: FloatArray, may_pay: bool, level: float, flat_within: float
) -> ReplacementCosts:
    """From cost rates (draws, ages) and those of failures alone (draws,)."""
    ends = [(1.0 - level) / 2.0, (1.0 + level) / 2.0]
    expected, alone = rates.mean(axis=0), float(never.mean())
    best = int(np.argmin(expected))
    pays = may_pay and expected[best] < alone
    least = float(expected[best]) if pays else alone
    savings = 1.0 - rates[:, best] / never if pays else np.zeros(never.size)
    own = np.argmin(rates, axis=1)
    own_ages = np.where(rates.min(axis=1) < never, ages[own], inf) if may_pay else np.full(never.size, inf)
    close = np.flatnonzero(expected <= least * (1.0 + flat_within))
    flat = (float(ages[close[0]]), float(ages[close[-1]])) if close.size else (inf, inf)
    if close.size and alone <= least * (1.0 + flat_within):
        flat = (flat[0], inf)
    lower, upper = np.quantile(rates, ends, axis=0)
    # no interpolation: some of them are endless
    age_ends = np.quantile(own_ages, ends, method="inverted_cdf")
    return ReplacementCosts(
        age=float(ages[best]) if pays else inf,
        cost_rate=least,
        ages=ages,
        curve=expected,
        lower=lower,
        upper=upper,
        never=alone,
        never_band=_pair(np.quantile(never, ends)),
        age_lower=float(age_ends[0]),
        age_upper=float(age_ends[1]),
        saving=1.0 - least / alone,
        saving_band=_pair(np.quantile(savings, ends)),
        chance=float((savings > 0).mean()),
        flat=flat,
        flat_within=flat_within,
        level=level,
    )


def _pair(values: FloatArray) -> tuple[float, float]:
    return float(values[0]), float(values[1])


class _Lives:
    """Draws times sites as rows of lives, with the positions each site stands for."""

    def __init__(self, draws: PosteriorDraws, sites: Mapping[Any, float] | None) -> None:
        labels = list(sites) if sites else []
        shares = np.array([float(sites[label]) for label in labels]) if sites else np.ones(1)
        if not (np.isfinite(shares).all() and (shares >= 0).all() and shares.sum() > 0):
            raise InvalidArgument("sites must hold how many positions stand at each; one at least.")
        factors = draws.for_sites(labels) if labels else np.ones((len(draws), 1))
        self._set(draws, factors, shares / shares.sum(), np.arange(len(draws)))

    def _set(self, draws: PosteriorDraws, factors: FloatArray, shares: FloatArray, kept: NDArray[np.int64]) -> None:
        self.draws, self.factors, self.shares, self.kept = draws, factors[kept], shares, kept
        self.scale = np.broadcast_to(draws.scales[kept][:, None], self.factors.shape)

    def thinned(self, rows: int) -> _Lives:
        """Every so many draws, so that draws times sites stay below `rows`."""
        step = max(1, -(-self.factors.size // rows))
        fewer = object.__new__(_Lives)
        whole = np.empty((len(self.draws), self.factors.shape[1]))
        whole[self.kept] = self.factors
        fewer._set(self.draws, whole, self.shares, self.kept[step // 2 :: step])
        return fewer

    def survival(self, ages: FloatArray) -> FloatArray:
        """(draws, sites, n) at ages (n,)."""
        return np.exp(-self.cumulative(np.asarray(ages)[None, None, :]))

    def cumulative(self, ages: FloatArray, site: slice = slice(None)) -> FloatArray:
        """-log S at ages (draws or 1, sites or 1, n): an early share fails evenly, the others live given survival."""
        until, factors = self.draws.early_until, self.factors[:, site, None]
        early = self.draws.early_shares[self.kept][:, None, None]
        if not until:
            return factors * self._unit(ages)
        first = -np.log1p(-early * np.minimum(ages, until) / until)
        late = self._unit(np.maximum(ages, until)) - self._unit(np.full((1, 1, 1), until))
        found: FloatArray = first + factors * late
        return found

    def _unit(self, ages: FloatArray) -> FloatArray:
        """Cumulative hazard of a site like the average, (draws, sites or 1, n)."""
        scale, shape = (values[self.kept][:, None, None] for values in (self.draws.scales, self.draws.shapes))
        with np.errstate(divide="ignore", over="ignore"):
            logs = np.log(ages / scale)
            weibull: FloatArray = np.exp(shape * logs)
            if self.draws.deviations is None:
                return weibull
            deviation = self.draws.deviations[self.kept][:, None, None]
            lognormal = -log_ndtr(-logs / np.where(deviation > 0, deviation, 1.0))
        return np.where(deviation > 0, lognormal, weibull)

    def flat_survival(self, ages: FloatArray) -> FloatArray:
        alive = self.survival(ages)
        return alive.reshape(-1, alive.shape[2])

    def averaged(self, values: FloatArray) -> FloatArray:
        """Over sites, by their positions: (draws, sites, ...) to (draws, ...)."""
        weighed: FloatArray = np.tensordot(values, self.shares, axes=([1], [0]))
        return weighed

    def ages(self) -> FloatArray:
        """Up to where 98 in 100 have failed by the averaged life, at most four of its median lives."""
        middle = float(np.median(self.scale))
        grid = np.geomspace(middle * 1e-3, middle * 1e3, 400)
        alive = self.averaged(self.survival(grid)).mean(axis=0)
        past, half = np.minimum(np.searchsorted(-alive, [-0.02, -0.5]), grid.size - 1)
        return np.linspace(0.0, min(grid[past], 4.0 * grid[half]), AGES + 1)[1:]

    def mean_life(self) -> FloatArray:
        """int S (draws, sites), by the trapezoid rule on the log of the age."""
        low, high = np.log(self.scale) - 40.0, np.log(self.scale) + 60.0
        for _ in range(50):
            middle = (low + high) / 2.0
            over = self.cumulative(np.exp(middle)[:, :, None])[:, :, 0] > _TAIL
            low, high = np.where(over, low, middle), np.where(over, middle, high)
        span = np.linspace(-30.0, 0.0, _TAIL_POINTS)
        total = np.zeros_like(low)
        # site by site: all at once would fill some hundred megabytes
        for site in range(low.shape[1]):
            ages = np.exp(high[:, site : site + 1, None] + span)
            alive = np.exp(-self.cumulative(ages, slice(site, site + 1)))
            total[:, site] = np.trapezoid(alive * ages, dx=span[1] - span[0], axis=2)[:, 0]
        return total


def _rates(lives: _Lives, ages: FloatArray, planned_cost: float, failure_cost: float) -> FloatArray:
    """g (draws, sites, ages); integrals by Gauss's rule with 4 points in each of some hundred pieces."""
    points, weights = np.polynomial.legendre.leggauss(4)
    # the hazard bends where early failures end: no piece may straddle that age
    edges = np.unique(np.concatenate([np.linspace(0.0, ages[-1], AGES + 1), ages, [lives.draws.early_until]]))
    edges = edges[edges <= ages[-1]]
    half = np.diff(edges) / 2.0
    at = (edges[:-1] + half)[:, None] + half[:, None] * points
    values = lives.survival(at.ravel())
    pieces = (values.reshape(*values.shape[:2], *at.shape) * weights).sum(axis=3) * half
    lived = np.cumsum(pieces, axis=2)[:, :, np.searchsorted(edges, ages) - 1]
    cost = failure_cost - (failure_cost - planned_cost) * lives.survival(ages)
    rates: FloatArray = cost / lived
    return rates
