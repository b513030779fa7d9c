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
    entries. basis (2, P) gives the group's (log shape, level) from all P parameters.
    """

    log_ages: FloatArray
    signed_weights: FloatArray
    clusters: IntArray
    failures: float
    sum_log_exact: float
    basis: FloatArray

    def sums_at(self, point: FloatArray, count: int) -> FloatArray:
        """`cluster_sums` at all P parameters."""
        log_shape, level = self.basis @ point
        return self.cluster_sums(math.exp(log_shape), float(level), count)

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


def group_rows(lifetimes: Lifetimes, clusters: IntArray, log_reference: float, basis: FloatArray) -> GroupRows:
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
        basis=basis,
    )


@dataclass(frozen=True, eq=False)
class RatioLikelihood:
    """Log-likelihood in (log shape, level) of the first group, then of the second, and a log hazard factor of the first
    group's past where there is one, shape (4,) or (5,).

    H_g(t) = exp(shape_g (log t - log_reference) + level_g), times z of the site in all groups; z ~ Gamma(1/nu, 1/nu),
    nu averaged over its prior, as in `SiteLikelihood`. Without nodes z is 1: independent lives.
    """

    groups: tuple[GroupRows, ...]
    failures: FloatArray  # of each cluster, all groups, shape (S,)
    log_reference: float
    nodes: SpreadNodes | None

    @property
    def size(self) -> int:
        """Number of parameters P."""
        return int(self.groups[0].basis.shape[1])

    def __call__(self, point: FloatArray) -> Evaluation:
        with np.errstate(over="ignore", invalid="ignore", under="ignore"):
            value, slope, bend = self._terms(point)
        if not (math.isfinite(value) and np.isfinite(slope).all() and np.isfinite(bend).all()):
            return -math.inf, np.zeros(self.size), np.zeros((self.size, self.size))
        return value, slope, bend

    def _terms(self, point: FloatArray) -> Evaluation:
        count, size = self.failures.size, self.size
        value, slope, bend = 0.0, np.zeros(size), np.zeros((size, size))
        hazard, first, sums = np.zeros(count), np.zeros((count, size)), []
        for rows in self.groups:
            log_shape, level = (float(part) for part in rows.basis @ point)
            tilt = math.exp(log_shape) * rows.sum_log_exact
            value += rows.failures * (log_shape + level) + tilt
            slope += rows.basis.T @ [rows.failures + tilt, rows.failures]
            bend += tilt * np.outer(rows.basis[0], rows.basis[0])
            found = rows.cluster_sums(math.exp(log_shape), level, count)
            hazard += found[0]
            first += found[[1, 0]].T @ rows.basis
            sums.append(found)
        if self.nodes is None:
            second = self._second(sums, np.ones((count, 1)))[0]
            return value - float(hazard.sum()), slope - first.sum(axis=0), bend - second
        spreads = self.nodes.spreads
        counted = 1.0 + self.failures[:, None] * spreads
        mean = counted / (1.0 + hazard[:, None] * spreads)
        gain = spreads * mean * mean / counted
        heights = self._heights(hazard)
        top = float(heights.max())
        shares = np.exp(heights - top)
        value += top + math.log(float(shares.sum()))
        shares /= shares.sum()
        slopes = -mean.T @ first  # (V, P)
        bends = (gain.T[:, None, :] * first.T) @ first - self._second(sums, mean)
        middle = shares @ slopes
        spread_bend = np.tensordot(shares, bends, 1) + (slopes * shares[:, None]).T @ slopes
        return value, slope + middle, bend + spread_bend - np.outer(middle, middle)

    def _heights(self, hazard: FloatArray) -> FloatArray:
        """Log of prior mass times the clusters' terms for each node of nu, shape (V,)."""
        assert self.nodes is not None
        spreads = self.nodes.spreads
        logs = rising_log(self.failures, spreads) - (self.failures[:, None] + 1.0 / spreads) * np.log1p(
            hazard[:, None] * spreads
        )
        return logs.sum(axis=0) + self.nodes.log_masses

    def _second(self, sums: list[FloatArray], factors: FloatArray) -> FloatArray:
        """Sum over clusters of factor x second derivatives of the hazard, shape (V, P, P)."""
        bends = np.zeros((factors.shape[1], self.size, self.size))
        for rows, (hazard, by_shape, by_shape_twice) in zip(self.groups, sums, strict=True):
            twice, both, level = (factors.T @ part for part in (by_shape_twice, by_shape, hazard))
            inner = np.stack([np.stack([twice, both], axis=-1), np.stack([both, level], axis=-1)], axis=-1)
            bends += rows.basis.T @ inner @ rows.basis
        return bends

    def values(self, points: FloatArray) -> FloatArray:
        """Log-likelihood at many points (draws, P), shape (draws,)."""
        total, hazard = np.zeros(len(points)), np.zeros((len(points), self.failures.size))
        with np.errstate(over="ignore", invalid="ignore", under="ignore"):
            for rows in self.groups:
                logs, levels = (points @ rows.basis.T).T
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
        """Mean of nu given the parameters; 0 for independent lives."""
        if self.nodes is None:
            return 0.0
        hazard = np.sum([rows.sums_at(point, self.failures.size)[0] for rows in self.groups], axis=0)
        heights = self._heights(hazard)
        shares = np.exp(heights - heights.max())
        return float(shares @ self.nodes.spreads / shares.sum())


def ratio_likelihood(
    first: Lifetimes,
    second: Lifetimes,
    clusters: tuple[IntArray, ...] | None,
    prior_mean: float,
    past: Lifetimes | None = None,
) -> RatioLikelihood:
    """Prepare the groups once; clusters are numbers of sites common to all of them, None for independent lives.

    past: lives of the first group's parts before they are compared; same shape, hazard times a factor of its own.
    """
    lives = [first, second] if past is None else [first, second, past]
    exact = np.concatenate([group.durations[group.observed] for group in lives])
    weights = np.concatenate([group.weights[group.observed] for group in lives])
    reference = float(np.average(np.log(exact), weights=weights))
    independent = clusters is None
    if clusters is None:
        clusters = tuple(np.zeros(len(group), dtype=np.int64) for group in lives)
    count = int(max(code.max() for code in clusters)) + 1
    failures = np.zeros(count)
    for code, group in zip(clusters, lives, strict=True):
        failures += np.bincount(code, weights=group.weights * group.observed, minlength=count)
    every = np.eye(4 if past is None else 5)
    bases = [every[[0, 1]], every[[2, 3]]] + ([] if past is None else [np.stack([every[0], every[1] + every[4]])])
    nodes = spread_nodes(prior_mean, SMALLEST_SPREAD, LARGEST_SPREAD * prior_mean, SPREAD_STEP)
    return RatioLikelihood(
        groups=tuple(
            group_rows(group, code, reference, basis) for group, code, basis in zip(lives, clusters, bases, strict=True)
        ),
        failures=failures,
        log_reference=reference,
        nodes=None if independent else nodes,
    )
