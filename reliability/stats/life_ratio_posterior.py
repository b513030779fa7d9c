"""How probable is it that the new parts live longer, or reach the hope? The posterior of the life ratio."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np

from reliability.stats.errors import InvalidArgument, NotConverged, TooFewFailures, UnsupportedRows
from reliability.stats.life_ratio_clusters import shared_clusters
from reliability.stats.life_ratio_likelihood import MANY_CLUSTERS, RatioLikelihood, ratio_likelihood
from reliability.stats.lifetimes import FloatArray, Lifetimes
from reliability.stats.newton import Evaluation, maximise

LOG_SHAPE_PRIOR = (math.log(2.0), 1.0)
# half a failure's worth of knowledge about the level of each group; without it no failures would say nothing
PRIOR_FAILURES = 0.5
DRAWS, FEWEST_EFFECTIVE = 3000, 400
# rows x draws held at once, and in all: with so many rows the posterior is nearly normal and needs few draws
CHUNK, MOST_WORK, FEWEST_DRAWS = 4_000_000, 30_000_000, 400
TAIL_FREEDOM = 5.0
# with so many failures on both sides the posterior is normal to the digits that its draws can tell
NORMAL_FROM = 10_000
FAR_NODES = 500.0  # as in life_ratio


@dataclass(frozen=True, eq=False)
class LifeRatioPosterior:
    """Draws from the posterior of both groups' Weibull lives at a typical site, equally likely, shapes (draws,).

    effective_draws: how many independent draws the weighted ones are worth, before they were drawn again.
    """

    before_shapes: FloatArray
    before_scales: FloatArray
    after_shapes: FloatArray
    after_scales: FloatArray
    effective_draws: float

    def log_ratios(self, share: float = 0.5) -> FloatArray:
        """log of the ratio of the ages by which the share has failed."""
        if not 0.0 < share < 1.0:
            raise InvalidArgument(f"The share failed is {share:g}; it must lie between 0 and 1.")
        log_hazard = math.log(-math.log1p(-share))
        after = np.log(self.after_scales) + log_hazard / self.after_shapes
        return after - np.log(self.before_scales) - log_hazard / self.before_shapes

    def probability(self, at_least: float = 1.0, share: float = 0.5) -> float:
        """Chance that the new parts live at least so many times as long, at the median or another share failed."""
        if not at_least > 0.0:
            raise InvalidArgument(f"The factor of life is {at_least:g}; it must be above 0.")
        return float((self.log_ratios(share) >= math.log(at_least)).mean())

    def interval(self, share: float = 0.5, level: float = 0.95) -> tuple[float, float, float]:
        """Median of the ratio and its credible limits, equal tails."""
        if not 0.0 < level < 1.0:
            raise InvalidArgument(f"The level is {level:g}; it must lie between 0 and 1.")
        tail = 0.5 * (1.0 - level)
        low, middle, high = np.exp(np.quantile(self.log_ratios(share), [tail, 0.5, 1.0 - tail]))
        return float(middle), float(low), float(high)

    def effects(self) -> FloatArray:
        """log hazard ratio, old over new: the drift of a log-rank score for each unit of its information."""
        return 0.5 * (self.before_shapes + self.after_shapes) * self.log_ratios(0.5)


def life_ratio_posterior(
    before: Lifetimes,
    after: Lifetimes,
    *,
    sites: Any = None,
    positions: Any = None,
    past: Lifetimes | None = None,
    spread_prior: float = 1.0,
    log_shape_prior: tuple[float, float] = LOG_SHAPE_PRIOR,
    draws: int = DRAWS,
    rng: np.random.Generator | None = None,
) -> LifeRatioPosterior:
    """Posterior of both groups' lives, sites (or positions) sharing a multiplier as in `life_ratio`; one group may be
    without a failure.

    Priors, the same for both groups: log shape normal(log 2, 1); level H(t_ref)^(1/2), t_ref the group's greatest age
    at risk; nu exponential; log of the past's factor normal(0, 1) (past: as in `life_ratio`). Importance sampling from
    a multivariate t about the top, refined until it is worth 400 independent draws; then systematic resampling. From
    10,000 failures on each side on the draws are those of the normal posterior at the top (section 4.1 there), which
    differs by less than the draws do. Seeded (rng=None draws the same every time).
    Gelman et al., Bayesian Data Analysis (2013), section 10.4. Raises TooFewFailures where neither group has failed,
    UnsupportedRows for rows with last_good, InvalidArgument, NotConverged.
    """
    for name, lives in (("old", before), ("new", after), ("past", past)):
        if lives is not None and lives.has_intervals:
            raise UnsupportedRows(
                f"{int(lives.is_interval.sum())} {name} parts failed somewhere between two ages. Use counted_at_middle "
                "where these ages lie close together."
            )
    if not before.observed.any() and not after.observed.any():
        raise TooFewFailures(
            f"None of {before.count:g} old and {after.count:g} new parts has failed, so nothing can be said about "
            "which lives longer. Wait for failures.",
            failures=0,
            needed=1,
        )
    if draws < 200:
        raise InvalidArgument(f"{draws} draws are too few; ask for at least 200.")
    rng = np.random.default_rng(31) if rng is None else rng
    clusters = shared_clusters(before, after, sites, positions, past)
    whole = ratio_likelihood(before, after, clusters, spread_prior, past)
    likelihood = whole.narrowed(_level_start(whole), FAR_NODES)
    ends = np.log([float(lives.durations.max()) for lives in (before, after)]) - likelihood.log_reference
    posterior = _Posterior(likelihood, ends, log_shape_prior)
    points, effective = _sampled(posterior, draws, rng)
    shapes = np.exp(points[:, [0, 2]])
    log_scales = likelihood.log_reference + posterior.log_ends - points[:, [1, 3]] / shapes
    scales = np.exp(np.clip(log_scales, -700.0, 700.0))
    return LifeRatioPosterior(shapes[:, 0], scales[:, 0], shapes[:, 1], scales[:, 1], effective)


def _level_start(likelihood: RatioLikelihood) -> FloatArray:
    """A point near the top: shape 2, each group's level such that as many are expected to fail as did."""
    point = np.array([LOG_SHAPE_PRIOR[0], 0.0, LOG_SHAPE_PRIOR[0], 0.0, 0.0])[: likelihood.size]
    if likelihood.nodes is None or likelihood.failures.size < MANY_CLUSTERS:
        return point
    for number, rows in enumerate(likelihood.groups[:2]):
        expected = float(rows.sums_at(point, likelihood.failures.size)[0].sum())
        point[2 * number + 1] = math.log(max(rows.failures, 0.5) / max(expected, 1e-300))
    return point


@dataclass(frozen=True, eq=False)
class _Posterior:
    """Log posterior in (log shape, w) of both groups, w = log H(t_ref), up to a constant.

    Few failures leave w nearly independent of the shape, which a level at a common reference is not. The prior is flat
    in log scale but for H(t_ref)^(1/2), and w = shape x (log t_ref - log scale): hence - log shape.
    """

    likelihood: RatioLikelihood
    log_ends: FloatArray  # log t_ref less the likelihood's reference
    log_shape_prior: tuple[float, float]

    def inner(self, points: FloatArray) -> FloatArray:
        """(log shape, level) of both groups for points (draws, 4)."""
        levels = points.copy()
        levels[:, [1, 3]] -= np.exp(points[:, [0, 2]]) * self.log_ends
        return levels

    def __call__(self, point: FloatArray) -> Evaluation:
        value, by_level, second = self.likelihood(self.inner(point[None])[0])
        turn = np.eye(point.size)
        for at, log_end in zip((0, 2), self.log_ends, strict=True):
            turn[at + 1, at] = -math.exp(point[at]) * log_end
        slope, bend = turn.T @ by_level, turn.T @ second @ turn
        centre, width = self.log_shape_prior
        for at in (0, 2):
            off = (float(point[at]) - centre) / width
            value += -0.5 * off * off - float(point[at]) + PRIOR_FAILURES * float(point[at + 1])
            slope[at] += -off / width - 1.0
            slope[at + 1] += PRIOR_FAILURES
            bend[at, at] += by_level[at + 1] * turn[at + 1, at] - 1.0 / width**2
        value -= 0.5 * float((point[4:] ** 2).sum())
        slope[4:] -= point[4:]
        bend[4:, 4:] -= np.eye(point.size - 4)
        return value, slope, bend

    def values(self, points: FloatArray) -> FloatArray:
        rows = sum(group.log_ages.size for group in self.likelihood.groups)
        chunk = max(1, CHUNK // max(rows, 1))
        inner = self.inner(points)
        total = np.concatenate(
            [self.likelihood.values(inner[low : low + chunk]) for low in range(0, len(points), chunk)]
        )
        centre, width = self.log_shape_prior
        for at in (0, 2):
            logs = points[:, at]
            total += -0.5 * ((logs - centre) / width) ** 2 - logs + PRIOR_FAILURES * points[:, at + 1]
        total -= 0.5 * (points[:, 4:] ** 2).sum(axis=1)
        return np.where(np.isfinite(total), total, -np.inf)


def _sampled(posterior: _Posterior, draws: int, rng: np.random.Generator) -> tuple[FloatArray, float]:
    size = posterior.likelihood.size
    start = np.array([LOG_SHAPE_PRIOR[0], 0.0, LOG_SHAPE_PRIOR[0], -1.0, 0.0])[:size]
    box = np.array([6.0, 600.0, 6.0, 600.0, 20.0])[:size]
    top = maximise(posterior, start, -box, box, np.array([0.5, 2.0, 0.5, 2.0, 0.5])[:size])
    if top.converged and min(group.failures for group in posterior.likelihood.groups[:2]) >= NORMAL_FROM:
        root = np.linalg.cholesky(np.linalg.inv(-top.hessian))
        return top.point + rng.standard_normal((draws, size)) @ root.T, float(draws)
    centre, spread = top.point, _spread_of(top.hessian)
    rows = sum(group.log_ages.size for group in posterior.likelihood.groups)
    tried = min(draws, max(FEWEST_DRAWS, MOST_WORK // max(rows, 1)))
    for _ in range(6):
        root = np.linalg.cholesky(spread)
        normal = rng.standard_normal((tried, size))
        stretch = np.sqrt(TAIL_FREEDOM / rng.chisquare(TAIL_FREEDOM, tried))
        points = centre + (normal * stretch[:, None]) @ root.T
        distance = (normal**2).sum(axis=1) * stretch**2
        logs = posterior.values(points) + 0.5 * (TAIL_FREEDOM + size) * np.log1p(distance / TAIL_FREEDOM)
        weights = np.exp(logs - logs.max())
        weights /= weights.sum()
        effective = 1.0 / float((weights**2).sum())
        if effective >= FEWEST_EFFECTIVE * tried / DRAWS:
            places = (np.arange(draws) + rng.random()) / draws
            chosen = np.minimum(np.searchsorted(np.cumsum(weights), places), tried - 1)
            return points[chosen], effective
        # move and widen towards where the weights are
        centre = weights @ points
        spread = (points - centre).T @ ((points - centre) * weights[:, None]) * 1.3 + 1e-6 * np.eye(size)
    raise NotConverged(
        "The posterior of the life ratio could not be sampled well. Wait for more failures.", iterations=6
    )


def _spread_of(hessian: FloatArray) -> FloatArray:
    """Covariance at the top, wide directions kept within reason."""
    values, vectors = np.linalg.eigh(-hessian)
    return (vectors / np.clip(values, 1e-2, None)) @ vectors.T * 1.2
