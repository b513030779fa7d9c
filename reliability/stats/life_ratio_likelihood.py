"""Log-likelihood of two groups of Weibull lives at the same sites, whose hazards share a multiplier for each site."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from reliability.stats.lifetimes import FloatArray, IntArray, Lifetimes
from reliability.stats.newton import Evaluation
from reliability.stats.site_likelihood import SpreadNodes, rising_log, spread_nodes
from reliability.stats.weibull_likelihood import LARGEST_LOG_HAZARD

SMALLEST_SPREAD, LARGEST_SPREAD, SPREAD_STEP = 1e-3, 30.0, 0.45


@dataclass(frozen=True, eq=False)
class GroupRows:
    """One group's rows without intervals, sorted by cluster: log ages less the reference, weights with a minus for
    entries.
    """

    log_ages: FloatArray
    signed_weights: FloatArray
    clusters: IntArray
    failures: float
    sum_log_exact: float

    def cluster_sums(self, shape: float, level: float, count: int) -> FloatArray:
        """Cumulative hazard of each cluster, its slope and second derivative in log shape, shape (3, count)."""
        y = shape * self.log_ages
        hazard = np.exp(np.minimum(y + level, LARGEST_LOG_HAZARD)) * self.signed_weights
        rows = (hazard, hazard * y, hazard * y * (y + 1.0))
        sums = np.stack([np.bincount(self.clusters, weights=row, minlength=count) for row in rows])
        sums[0] = np.maximum(sums[0], 0.0)
        return sums

    def hazards(self, shapes: FloatArray, levels: FloatArray, count: int) -> FloatArray:
        """Cumulative hazard of each cluster for many (shape, level), shape (draws, count)."""
        powers = np.minimum(shapes[:, None] * self.log_ages + levels[:, None], LARGEST_LOG_HAZARD)
        rows = np.exp(powers) * self.signed_weights
        present, first = np.unique(self.clusters, return_index=True)
        sums = np.zeros((shapes.size, count))
        sums[:, present] = np.maximum(np.add.reduceat(rows, first, axis=1), 0.0)
        return sums


def group_rows(lifetimes: Lifetimes, clusters: IntArray, log_reference: float) -> GroupRows:
    late = lifetimes.entries > 0
    ages = np.concatenate([lifetimes.durations, lifetimes.entries[late]])
    signed = np.concatenate([lifetimes.weights, -lifetimes.weights[late]])
    where = np.concatenate([clusters, clusters[late]])
    # rows of one cluster and age are added: a site has few distinct days
    order = np.lexsort((ages, where))
    ages, signed, where = ages[order], signed[order], where[order]
    first = np.flatnonzero(np.append(True, (np.diff(ages) != 0.0) | (np.diff(where) != 0)))
    exact = lifetimes.observed
    logs = np.log(lifetimes.durations[exact]) - log_reference
    return GroupRows(
        log_ages=np.log(ages[first]) - log_reference,
        signed_weights=np.add.reduceat(signed, first),
        clusters=where[first],
        failures=lifetimes.failures,
        sum_log_exact=float(lifetimes.weights[exact] @ logs),
    )


@dataclass(frozen=True, eq=False)
class RatioLikelihood:
    """Log-likelihood in (log shape, level) of the first group, then of the second, shape (4,).

    H_g(t) = exp(shape_g (log t - log_reference) + level_g), times z of the site in both groups; z ~ Gamma(1/nu, 1/nu),
    nu averaged over its prior, as in `SiteLikelihood`. Without nodes z is 1: independent lives.
    """

    groups: tuple[GroupRows, GroupRows]
    failures: FloatArray  # of each cluster, both groups, shape (S,)
    log_reference: float
    nodes: SpreadNodes | None

    def __call__(self, point: FloatArray) -> Evaluation:
        with np.errstate(over="ignore", invalid="ignore", under="ignore"):
            value, slope, bend = self._terms(point)
        if not (math.isfinite(value) and np.isfinite(slope).all() and np.isfinite(bend).all()):
            return -math.inf, np.zeros(4), np.zeros((4, 4))
        return value, slope, bend

    def _terms(self, point: FloatArray) -> Evaluation:
        value, slope, bend = 0.0, np.zeros(4), np.zeros((4, 4))
        count = self.failures.size
        sums = []
        for number, rows in enumerate(self.groups):
            at, shape, level = 2 * number, math.exp(float(point[2 * number])), float(point[2 * number + 1])
            tilt = shape * rows.sum_log_exact
            value += rows.failures * (float(point[at]) + level) + tilt
            slope[at : at + 2] += [rows.failures + tilt, rows.failures]
            bend[at, at] += tilt
            sums.append(rows.cluster_sums(shape, level, count))
        hazard = sums[0][0] + sums[1][0]
        first = np.stack([sums[0][1], sums[0][0], sums[1][1], sums[1][0]], axis=1)  # of the hazard, (S, 4)
        if self.nodes is None:
            ones = np.ones((count, 1))
            return value - float(hazard.sum()), slope - first.sum(axis=0), bend - _second(sums, ones)[0]
        spreads = self.nodes.spreads
        counted = 1.0 + self.failures[:, None] * spreads
        mean = counted / (1.0 + hazard[:, None] * spreads)
        gain = spreads * mean * mean / counted
        logs = rising_log(self.failures, spreads) - (self.failures[:, None] + 1.0 / spreads) * np.log1p(
            hazard[:, None] * spreads
        )
        heights = logs.sum(axis=0) + self.nodes.log_masses
        top = float(heights.max())
        shares = np.exp(heights - top)
        value += top + math.log(float(shares.sum()))
        shares /= shares.sum()
        slopes = -mean.T @ first  # (V, 4)
        bends = np.einsum("sv,si,sj->vij", gain, first, first, optimize=True) - _second(sums, mean)
        middle = shares @ slopes
        spread_bend = np.einsum("v,vij->ij", shares, bends) + (slopes * shares[:, None]).T @ slopes
        return value, slope + middle, bend + spread_bend - np.outer(middle, middle)

    def values(self, points: FloatArray) -> FloatArray:
        """Log-likelihood at many points (draws, 4), shape (draws,)."""
        total, hazard = np.zeros(len(points)), np.zeros((len(points), self.failures.size))
        with np.errstate(over="ignore", invalid="ignore", under="ignore"):
            for number, rows in enumerate(self.groups):
                logs, levels = points[:, 2 * number], points[:, 2 * number + 1]
                shapes = np.exp(logs)
                total += rows.failures * (logs + levels) + shapes * rows.sum_log_exact
                hazard += rows.hazards(shapes, levels, self.failures.size)
            if self.nodes is None:
                return total - hazard.sum(axis=1)
            heights = np.empty((len(points), self.nodes.spreads.size))
            for place, spread in enumerate(self.nodes.spreads):
                fixed = float(rising_log(self.failures, np.array([spread])).sum())
                heights[:, place] = fixed - np.log1p(spread * hazard) @ (self.failures + 1.0 / spread)
        heights += self.nodes.log_masses
        top = heights.max(axis=1)
        return total + top + np.log(np.exp(heights - top[:, None]).sum(axis=1))

    def spread(self, point: FloatArray) -> float:
        """Mean of nu given shapes and levels; 0 for independent lives."""
        if self.nodes is None:
            return 0.0
        hazard = sum(
            rows.cluster_sums(math.exp(point[2 * k]), float(point[2 * k + 1]), self.failures.size)[0]
            for k, rows in enumerate(self.groups)
        )
        spreads = self.nodes.spreads
        logs = rising_log(self.failures, spreads) - (self.failures[:, None] + 1.0 / spreads) * np.log1p(
            np.asarray(hazard)[:, None] * spreads
        )
        heights = logs.sum(axis=0) + self.nodes.log_masses
        shares = np.exp(heights - heights.max())
        return float(shares @ spreads / shares.sum())


def _second(sums: list[FloatArray], factors: FloatArray) -> FloatArray:
    """Sum over clusters of factor x second derivatives of the hazard, shape (V, 4, 4)."""
    bends = np.zeros((factors.shape[1], 4, 4))
    for number, (hazard, by_shape, by_shape_twice) in enumerate(sums):
        at = 2 * number
        bends[:, at, at] = factors.T @ by_shape_twice
        bends[:, at, at + 1] = bends[:, at + 1, at] = factors.T @ by_shape
        bends[:, at + 1, at + 1] = factors.T @ hazard
    return bends


def ratio_likelihood(
    first: Lifetimes, second: Lifetimes, clusters: tuple[IntArray, IntArray] | None, prior_mean: float
) -> RatioLikelihood:
    """Prepare both groups once; clusters are numbers of sites common to both, None for independent lives."""
    exact = np.concatenate([lives.durations[lives.observed] for lives in (first, second)])
    weights = np.concatenate([lives.weights[lives.observed] for lives in (first, second)])
    reference = float(np.average(np.log(exact), weights=weights))
    independent = clusters is None
    if clusters is None:
        clusters = (np.zeros(len(first), dtype=np.int64), np.zeros(len(second), dtype=np.int64))
    count = int(max(clusters[0].max(), clusters[1].max())) + 1
    failures = sum(
        np.bincount(code, weights=lives.weights * lives.observed, minlength=count)
        for code, lives in zip(clusters, (first, second), strict=True)
    )
    nodes = spread_nodes(prior_mean, SMALLEST_SPREAD, LARGEST_SPREAD * prior_mean, SPREAD_STEP)
    return RatioLikelihood(
        groups=(group_rows(first, clusters[0], reference), group_rows(second, clusters[1], reference)),
        failures=np.asarray(failures, dtype=float),
        log_reference=reference,
        nodes=None if independent else nodes,
    )
