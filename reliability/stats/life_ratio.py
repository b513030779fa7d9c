"""How many times longer do the new parts live? Ratio of B10 and median lives, sites taken into account."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from reliability.stats.errors import (
    InvalidArgument,
    NoSpreadInFailures,
    NotConverged,
    StatisticsError,
    TooFewFailures,
    UndefinedEstimate,
    UnsupportedRows,
)
from reliability.stats.life_ratio_clusters import shared_clusters
from reliability.stats.life_ratio_likelihood import RatioLikelihood, ratio_likelihood
from reliability.stats.lifetimes import FloatArray, Lifetimes
from reliability.stats.newton import Evaluation, Maximum, maximise
from reliability.stats.profile_intervals import normal_quantile
from reliability.stats.weibull_fit import fit_weibull

# log shapes and log ages (from the reference) that a search may visit
HIGHEST = np.array([5.0, 60.0, 5.0, 60.0, 20.0])
LOWEST = -HIGHEST
LARGEST_STEP = np.array([0.7, 1.5, 0.7, 1.5, 1.0])
# a ratio beyond exp(12) either way is called unbounded
FARTHEST = 12.0
# log-likelihood below the highest node of the spread at which another plays no part, at a start and at the top
FAR_NODES, NEAR_NODES = 500.0, 60.0
FEW_FAILURES, ORDINARY_LOG_SHAPE = 15, 0.7
RESTARTS = 5


@dataclass(frozen=True)
class Ratio:
    """Life of the new parts over that of the old at the age by which the share `probability` has failed.

    upper_unbounded: the records put no upper limit on it (upper is inf); lower_unbounded: none below (lower is 0).
    """

    probability: float
    estimate: float
    lower: float
    upper: float
    before: float
    after: float
    confidence_level: float
    method: str
    lower_unbounded: bool = False
    upper_unbounded: bool = False


@dataclass(frozen=True, eq=False)
class LifeRatio:
    """Result of `life_ratio`: shapes of both groups and the ratios asked for.

    clusters: number of sites (or positions) whose hazards were let differ, 0 for independent lives; spread: their
    variance nu. The ratios speak of old and new parts at the same typical site.
    """

    before_shape: float
    after_shape: float
    common_shape: bool
    log_likelihood: float
    spread: float
    clusters: int
    ratios: tuple[Ratio, ...]
    _likelihood: RatioLikelihood = field(repr=False)
    _best: FloatArray = field(repr=False)

    @property
    def b10(self) -> Ratio:
        return self.ratio(0.1)

    @property
    def median(self) -> Ratio:
        return self.ratio(0.5)

    def ratio(self, probability: float, confidence_level: float = 0.95) -> Ratio:
        """The ratio at the age by which the share has failed, with its likelihood-ratio interval."""
        for known in self.ratios:
            if known.probability == probability and known.confidence_level == confidence_level:
                return known
        return _ratio(self._likelihood, self._best, self.common_shape, probability, confidence_level)


def life_ratio(
    before: Lifetimes,
    after: Lifetimes,
    *,
    sites: Any = None,
    positions: Any = None,
    past: Lifetimes | None = None,
    common_shape: bool = False,
    probabilities: Sequence[float] = (0.1, 0.5),
    confidence_level: float = 0.95,
    spread_prior: float = 1.0,
) -> LifeRatio:
    """Ratio of the ages by which a share of the new and of the old parts has failed (0.1: B10, 0.5: median).

    Weibull lives with a shape for each group (common_shape=True assumes one: a named assumption). The hazards of a
    site's old and new parts are multiplied by the same z ~ Gamma with mean 1 and variance nu, nu with an exponential
    prior of mean spread_prior over which the likelihood is averaged; the intervals are its likelihood-ratio intervals.
    Lives taken as independent held their truth in 57 to 89 % where sites differ.

    sites: the site of each life, a pair (of before, of after), or None for the sites that the lives carry; with fewer
    than two sites the lives count as independent. positions: likewise a pair; the multiplier then belongs to each
    position at a site, for parts renewed where the last one failed. past: what the old parts did before they are
    compared (see `split_at_start`), with a free factor on its hazard, so that it tells which sites or positions are bad
    and nothing of the season; sites and positions are then of three. Where positions differ it is needed: an old part
    that was already old when the comparison began stands at a good position.

    Kalbfleisch & Prentice, The Statistical Analysis of Failure Time Data (2002), chapter 3 and section 10.2; Klein &
    Moeschberger (2003), chapter 13. Raises TooFewFailures, NoSpreadInFailures, UndefinedEstimate (naming the group),
    UnsupportedRows for rows with last_good (see `counted_at_middle`), InvalidArgument.
    """
    for share in probabilities:
        if not 0.0 < share < 1.0:
            raise InvalidArgument(f"The share failed is {share:g}; it must lie between 0 and 1.")
    normal_quantile(confidence_level)
    clusters = shared_clusters(before, after, sites, positions, past)
    refuse_unusable(before, after, past)
    whole = ratio_likelihood(before, after, clusters, spread_prior, past)
    start = _start(before, after, whole, common_shape)
    likelihood, top = _highest(whole, start, common_shape)
    if not top.converged:
        raise NotConverged(
            "The search for the life ratio did not settle. Assume one shape for both, or wait for more failures.",
            iterations=top.iterations,
        )
    best = _free_matrix(likelihood.size, common_shape) @ top.point
    found = LifeRatio(
        before_shape=math.exp(best[0]),
        after_shape=math.exp(best[2]),
        common_shape=common_shape,
        log_likelihood=top.value,
        spread=likelihood.spread(best),
        clusters=0 if clusters is None else likelihood.failures.size,
        ratios=(),
        _likelihood=likelihood,
        _best=best,
    )
    ratios = tuple(found.ratio(float(share), confidence_level) for share in probabilities)
    return LifeRatio(**{**found.__dict__, "ratios": ratios})


def refuse_unusable(before: Lifetimes, after: Lifetimes, past: Lifetimes | None = None) -> None:
    if past is not None and past.has_intervals:
        raise UnsupportedRows("Some parts failed between two ages in the past. Use counted_at_middle for it as well.")
    for name, lives in (("old", before), ("new", after)):
        if lives.has_intervals:
            raise UnsupportedRows(
                f"{int(lives.is_interval.sum())} {name} parts failed somewhere between two ages. Use counted_at_middle "
                "where these ages lie close together."
            )
        if not lives.observed.any():
            raise TooFewFailures(
                f"None of {lives.count:g} {name} parts has failed, so there is no ratio of lives yet. What few "
                "failures still say is a bound under an assumed shape, and the chance of a longer life.",
                failures=0,
                needed=1,
            )


def _highest(whole: RatioLikelihood, start: FloatArray, common_shape: bool) -> tuple[RatioLikelihood, Maximum]:
    """The top, and the likelihood with only those nodes of the spread that count near it."""
    likelihood = whole.narrowed(start, FAR_NODES)
    top = _search(likelihood, start, common_shape)
    best = _free_matrix(whole.size, common_shape) @ top.point
    narrowed = whole.narrowed(best, NEAR_NODES)
    if narrowed.nodes is not None and likelihood.nodes is not None and likelihood is not whole:
        inside = np.isin(narrowed.nodes.spreads, likelihood.nodes.spreads)
        if not inside.all():  # the top lies where other nodes count
            top = _search(whole, best, common_shape)
            narrowed = whole.narrowed(_free_matrix(whole.size, common_shape) @ top.point, NEAR_NODES)
    return narrowed, top


def _start(before: Lifetimes, after: Lifetimes, likelihood: RatioLikelihood, common_shape: bool) -> FloatArray:
    """Each group fitted alone, as (log shape, level)."""
    point = np.zeros(likelihood.size)
    for number, (name, lives) in enumerate((("old", before), ("new", after))):
        try:
            fit = fit_weibull(lives)
        except NoSpreadInFailures as error:
            if not common_shape:
                raise NoSpreadInFailures(f"Of the {name} parts: {error}") from error
            shape, scale = 2.0, float(np.average(lives.durations, weights=lives.weights))
        except StatisticsError as error:
            raise UndefinedEstimate(f"Of the {name} parts: {error}") from error
        else:
            shape, scale = fit.shape, fit.scale
        log_shape = min(max(math.log(shape), -4.5), 4.5)
        point[2 * number : 2 * number + 2] = log_shape, shape * (likelihood.log_reference - math.log(scale))
    if common_shape:
        log_shape = 0.5 * (point[0] + point[2])
        scales = point[[1, 3]] / np.exp(point[[0, 2]])
        point[[0, 2]] = log_shape
        point[[1, 3]] = scales * math.exp(log_shape)
    return point


def _search(likelihood: RatioLikelihood, start: FloatArray, common_shape: bool) -> Maximum:
    """The top in what is free of (log shape, level) of each group and the past's factor."""
    free = _free_matrix(likelihood.size, common_shape)
    kept = free.argmax(axis=0)  # where each free number stands among all
    limits = np.array([5.0, 400.0, 5.0, 400.0, 20.0])[kept]
    steps = np.array([0.7, 3.0, 0.7, 3.0, 1.0])[kept]

    def evaluate(point: FloatArray) -> Evaluation:
        value, slope, bend = likelihood(free @ point)
        return value, free.T @ slope, free.T @ bend @ free

    top = maximise(evaluate, start[kept], -limits, limits, steps)
    for _ in range(RESTARTS):
        if top.converged or top.at_limit:
            break
        # far from the top a step may climb too little for the search to go on by itself
        top = maximise(evaluate, top.point, -limits, limits, steps)
    return top


def _free_matrix(size: int, common_shape: bool) -> FloatArray:
    """All parameters from the free ones, shape (size, free): the second log shape follows the first where common."""
    free = np.eye(size)
    if not common_shape:
        return free
    free[2, 0] = 1.0
    return np.delete(free, 2, axis=1)


@dataclass(frozen=True, eq=False)
class _Profile:
    """The likelihood with the log ratio psi held. Free are the first group's log shape and log age, the second's log
    shape (none where common), and last the past's factor (where there is one). Ages are those by which the share has
    failed, from the reference.
    """

    likelihood: RatioLikelihood
    common_shape: bool
    log_hazard: float
    best_free: FloatArray  # where the likelihood is highest of all

    def point(self, free: FloatArray, psi: float) -> FloatArray:
        """(log shape, log age) of both groups, and the past's factor."""
        full = self.spreading(free.size) @ free
        full[3] += psi
        return full

    def spreading(self, free: int) -> FloatArray:
        """All parameters from the free ones at psi = 0, shape (P, free)."""
        matrix = np.zeros((self.likelihood.size, free))
        matrix[[0, 1, 3], [0, 1, 1]] = 1.0
        matrix[2, 0 if self.common_shape else 2] = 1.0
        if self.likelihood.size == 5:
            matrix[4, -1] = 1.0
        return matrix

    def by_age(self, point: FloatArray) -> Evaluation:
        """The likelihood in (log shape, log age) of both groups: level = log_hazard - shape x log age."""
        inner = point.copy()
        turn, bends = np.eye(point.size), []
        for at in (0, 2):
            shape, age = math.exp(point[at]), float(point[at + 1])
            inner[at + 1] = self.log_hazard - shape * age
            turn[at + 1, at], turn[at + 1, at + 1] = -shape * age, -shape
            bends.append((at, -shape * age, -shape))
        value, slope, bend = self.likelihood(inner)
        second = turn.T @ bend @ turn
        for at, by_shape_twice, both in bends:
            second[at, at] += slope[at + 1] * by_shape_twice
            second[at, at + 1] += slope[at + 1] * both
            second[at + 1, at] += slope[at + 1] * both
        return value, turn.T @ slope, second

    def highest(self, psi: float, free: FloatArray, thorough: bool) -> tuple[float, float, FloatArray]:
        """Largest log-likelihood at psi, its slope in psi, and where it is. thorough: from other starts as well."""
        spreading = self.spreading(free.size)

        def evaluate(values: FloatArray) -> Evaluation:
            value, slope, bend = self.by_age(self.point(values, psi))
            return value, spreading.T @ slope, spreading.T @ bend @ spreading

        kept = spreading.argmax(axis=0)
        starts = [free]
        if thorough:
            # with few failures a steep and a flat shape may each be a top: the higher one counts
            for start in (free.copy(), self.best_free.copy()):
                start[kept == 2] = ORDINARY_LOG_SHAPE
                starts.append(start)
            starts[1][0] = ORDINARY_LOG_SHAPE
        tops = [maximise(evaluate, start, LOWEST[kept], HIGHEST[kept], LARGEST_STEP[kept]) for start in starts]
        top = max(tops, key=lambda found: found.value)
        return top.value, float(self.by_age(self.point(top.point, psi))[1][3]), top.point

    def limit(
        self, psi: float, free: FloatArray, peak: float, z: float, error: float, direction: float
    ) -> tuple[float, bool]:
        """Where twice the fall from the peak is z squared, beyond psi; True where it never is.

        With few failures another top may lie higher: that is looked for where the first one's limit is, and all the
        way only if there is one.
        """
        found, never = self._limit(psi, free, peak, z, error, direction, thorough=False)
        if never or min(rows.failures for rows in self.likelihood.groups) >= FEW_FAILURES:
            return found, never
        height = self.highest(found, free, thorough=True)[0]
        if math.sqrt(max(2.0 * (peak - height), 0.0)) > z * (1.0 - 1e-5):
            return found, never
        return self._limit(psi, free, peak, z, error, direction, thorough=True)

    def _limit(
        self, psi: float, free: FloatArray, peak: float, z: float, error: float, direction: float, *, thorough: bool
    ) -> tuple[float, bool]:
        inside, outside, start = psi, math.nan, psi
        guess = psi + direction * min(z * error, 2.0)
        for _ in range(80):
            if abs(guess) > FARTHEST:
                guess = direction * FARTHEST
            height, slope, free_there = self.highest(guess, free, thorough)
            fall = math.sqrt(max(2.0 * (peak - height), 0.0)) if math.isfinite(height) else math.inf
            if abs(fall - z) < 1e-6 * z:
                return guess, False
            if fall < z:
                if abs(guess) >= FARTHEST:
                    return guess, True
                inside, free = guess, free_there
            else:
                outside = guess
            if not math.isnan(outside) and abs(outside - inside) < 1e-9:
                return inside, False
            climb = -slope * direction
            newton = guess + direction * (z - fall) * fall / climb if 0.0 < fall < 3.0 * z and climb > 0 else math.nan
            if math.isnan(outside):
                reach = inside + direction * 2.0 * max(abs(inside - start), 0.02)
                guess = newton if direction * (newton - inside) > 0 and direction * (newton - reach) < 0 else reach
            else:
                low, high = min(inside, outside), max(inside, outside)
                guess = newton if low < newton < high else 0.5 * (inside + outside)
        raise NotConverged(
            "The limit of the life ratio was not found in 80 steps. Assume one shape for both.", iterations=80
        )


def _ratio(
    likelihood: RatioLikelihood, best: FloatArray, common_shape: bool, probability: float, confidence_level: float
) -> Ratio:
    log_hazard = math.log(-math.log1p(-probability))
    shapes = np.exp(best[[0, 2]])
    ages = (log_hazard - best[[1, 3]]) / shapes
    psi = float(ages[1] - ages[0])
    free = np.concatenate([[best[0], ages[0]], [] if common_shape else [best[2]], best[4:]])
    profile = _Profile(likelihood, common_shape, log_hazard, free)
    peak, _, bend = profile.by_age(profile.point(free, psi))
    error = _error_of_psi(bend, common_shape)
    z = normal_quantile(confidence_level)
    low, low_open = profile.limit(psi, free, peak, z, error, -1.0)
    high, high_open = profile.limit(psi, free, peak, z, error, 1.0)
    before, after = np.exp(np.minimum(ages + likelihood.log_reference, 700.0))
    return Ratio(
        probability=probability,
        estimate=math.exp(min(psi, 700.0)),
        lower=0.0 if low_open else math.exp(low),
        upper=math.inf if high_open else math.exp(high),
        before=float(before),
        after=float(after),
        confidence_level=confidence_level,
        method="likelihood ratio, " + ("sites let differ" if likelihood.nodes is not None else "independent lives"),
        lower_unbounded=low_open,
        upper_unbounded=high_open,
    )


def _error_of_psi(bend: FloatArray, common_shape: bool) -> float:
    """Standard error of the log ratio from the curvature in (log shape, log age) of both groups (and the factor)."""
    free = _free_matrix(len(bend), common_shape)
    at = 2 if common_shape else 3  # the second group's log age becomes the log ratio
    free[3, 1] = 1.0
    try:
        variance = float(np.linalg.inv(-(free.T @ bend @ free))[at, at])
    except np.linalg.LinAlgError:
        return 0.5
    return math.sqrt(variance) if 0.0 < variance < 9.0 else 1.0
