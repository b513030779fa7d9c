"""What the records leave open about a life, as one posterior for counting: early failures, sites, and the life's
family.

`weibull_posterior` answers for one model. Here models are averaged by their evidence (Hoeting, Madigan, Raftery &
Volinsky 1999, Statistical Science 14, 382): sites that do not differ at all beside sites that spread, and from six
failures on lognormal lives beside Weibull ones.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from math import log

import numpy as np
from numpy.typing import NDArray

from reliability.stats.early_failures import early_window
from reliability.stats.errors import InvalidArgument
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.posterior import WeibullPosterior, unrounded, weibull_posterior
from reliability.stats.posterior_draws import PosteriorDraws, joined_draws
from reliability.stats.posterior_lognormal import LognormalGrid, lognormal_grid

FloatArray = NDArray[np.float64]

FAMILIES_FROM = 6  # failures; with fewer the records cannot tell the families apart
WEIBULL_ODDS = 3.0  # prior odds of Weibull against lognormal lives
ALIKE_ODDS = 1.0  # prior odds of sites that do not differ against sites that spread


@dataclass(frozen=True)
class Candidate:
    """One model of the life and the share of the draws its evidence earns."""

    posterior: WeibullPosterior | LognormalGrid
    lognormal: bool
    spread: bool
    share: float


@dataclass(frozen=True, eq=False)
class LifePosterior:
    """Models averaged by evidence; `weibull` is the plain one among them, with the asked-for spread between sites."""

    candidates: Sequence[Candidate]
    weibull: WeibullPosterior

    @property
    def has_spread(self) -> bool:
        """True where sites may differ."""
        return any(candidate.spread for candidate in self.candidates)

    @property
    def early_until(self) -> float:
        """Age within which early failures are counted apart, 0 where none are seen."""
        return self.weibull.early_until

    @property
    def failures(self) -> float:
        """Failures the posterior has seen, early ones included."""
        return self.weibull.failures + self.weibull.early_counts[0]

    @cached_property
    def lognormal_share(self) -> float:
        """Posterior chance of lognormal lives."""
        return sum(candidate.share for candidate in self.candidates if candidate.lognormal)

    @cached_property
    def alike_share(self) -> float:
        """Posterior chance that sites do not differ."""
        return sum(candidate.share for candidate in self.candidates if not candidate.spread)

    def draws(self, count: int = 400, rng: np.random.Generator | None = None) -> PosteriorDraws:
        """Draws of each model in the proportion of its posterior chance."""
        if count < 1:
            raise InvalidArgument(f"count is {count}; it must be at least 1.")
        rng = np.random.default_rng() if rng is None else rng
        edges = np.cumsum([candidate.share for candidate in self.candidates]) * count + rng.random()
        counts = np.diff(np.floor(edges).astype(int), prepend=0)
        counts[-1] += count - counts.sum()
        parts = [
            candidate.posterior.draws(int(number), rng)
            for candidate, number in zip(self.candidates, counts, strict=True)
            if number > 0
        ]
        return joined_draws(parts, self.weibull.early_draws(count, rng), self.early_until, rng)


def life_posterior(
    lifetimes: Lifetimes,
    *,
    site_spread: bool = False,
    log_shape_prior: tuple[float, float] = (log(2.0), 1.0),
    spread_prior: float = 1.0,
    early_until: float | None = None,
    rounded_up_to: float = 0.0,
) -> LifePosterior:
    """Posterior for counts of failures to come. Arguments as in `weibull_posterior`.

    early_until: looked for in the records if None. With site_spread (and two sites) half the prior is on sites alike.
    """
    lifetimes = unrounded(lifetimes, rounded_up_to)
    until = early_window(lifetimes) if early_until is None else early_until
    spreads = [False, True] if site_spread and lifetimes.site_labels.size > 1 else [site_spread]
    weibulls = [
        weibull_posterior(
            lifetimes,
            site_spread=spread,
            log_shape_prior=log_shape_prior,
            spread_prior=spread_prior,
            early_until=until,
        )
        for spread in spreads
    ]
    found: list[tuple[WeibullPosterior | LognormalGrid, bool, bool, float]] = []
    for spread, weibull in zip(spreads, weibulls, strict=True):
        odds = log(ALIKE_ODDS) if not spread else -log(spread_prior)
        evidence = weibull.evidence - log(log_shape_prior[1]) + odds
        found.append((weibull, False, spread, evidence + log(WEIBULL_ODDS)))
        if weibull.failures >= FAMILIES_FROM:
            other = lognormal_grid(weibull.lifetimes, _spread_axis(weibull), spread_prior, _middle(weibull))
            found.append((other, True, spread, other.evidence + odds))
    logs = np.array([entry[3] for entry in found])
    shares = np.exp(logs - logs.max())
    shares /= shares.sum()
    candidates = [
        Candidate(*entry[:3], float(share)) for entry, share in zip(found, shares, strict=True) if share > 1e-4
    ]
    return LifePosterior(candidates, weibulls[-1])


def _spread_axis(weibull: WeibullPosterior) -> FloatArray:
    log_spread = np.unique(weibull.log_spread)
    return log_spread if log_spread.size == 1 else np.linspace(log_spread[0], log_spread[-1], 9)


def _middle(weibull: WeibullPosterior) -> tuple[float, float]:
    """An age among the failures and the share failed by then, by the Weibull posterior's mean."""
    lives = weibull.lifetimes
    order = np.argsort(lives.durations)
    weight = np.cumsum((lives.weights * lives.observed)[order])
    age = float(lives.durations[order][np.searchsorted(weight, 0.5 * weight[-1])])
    shape = float(np.exp(weibull.weight @ weibull.log_shape))
    level = float(weibull.weight @ weibull.log_level)
    return age, float(-np.expm1(-np.exp(level + shape * np.log(age))))
