"""Log-likelihood of two groups of Weibull lives at the same sites, whose hazards share a multiplier for each site."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from reliability.stats.life_ratio_rows import GroupMoments, GroupRows, group_rows
from reliability.stats.lifetimes import FloatArray, IntArray, Lifetimes
from reliability.stats.newton import Evaluation
from reliability.stats.site_likelihood import SpreadNodes, rising_log, spread_nodes

MANY_CLUSTERS = 2000
SMALLEST_SPREAD, LARGEST_SPREAD, SPREAD_STEP = 1e-3, 30.0, 0.45


@dataclass(frozen=True, eq=False)
class RatioLikelihood:
    """Log-likelihood in (log shape, level) of the first group, then of the second, and a log hazard factor of the first
    group's past where there is one, shape (4,) or (5,).

    H_g(t) = exp(shape_g (log t - log_reference) + level_g), times z of the site in all groups; z ~ Gamma(1/nu, 1/nu),
    nu averaged over its prior, as in `SiteLikelihood`. Without nodes z is 1: independent lives.
    """

    groups: tuple[GroupRows | GroupMoments, ...]
    failures: FloatArray  # of each cluster, all groups, shape (S,)
    log_reference: float
    nodes: SpreadNodes | None

    @property
    def size(self) -> int:
        """Number of parameters P."""
        return int(self.groups[0].basis.shape[1])

    def __call__(self, point: FloatArray) -> Evaluation:
        key = point.tobytes()
        if key not in self._last:
            self._last.clear()
            self._last[key] = self._evaluated(point)
        return self._last[key]

    @cached_property
    def _last(self) -> dict[bytes, Evaluation]:
        """The latest evaluation: a search asks again where it ended."""
        return {}

    @cached_property
    def _rising(self) -> FloatArray:
        """Sum over clusters of log (1 + j nu), j below the failures, for each node, shape (V,)."""
        assert self.nodes is not None
        failures, count = np.unique(self.failures, return_counts=True)
        return count @ rising_log(failures, self.nodes.spreads)

    def _evaluated(self, point: FloatArray) -> Evaluation:
        with np.errstate(over="ignore", invalid="ignore", under="ignore"):
            value, slope, bend = self._terms(point)
        if not (math.isfinite(value) and np.isfinite(slope).all() and np.isfinite(bend).all()):
            return -math.inf, np.zeros(self.size), np.zeros((self.size, self.size))
        return value, slope, bend

    def _terms(self, point: FloatArray) -> Evaluation:
        count, size = self.failures.size, self.size
        value, slope, bend = 0.0, np.zeros(size), np.zeros((size, size))
        hazard, first, sums = np.zeros(count), np.zeros((size, count)), []
        for rows in self.groups:
            log_shape, level = (float(part) for part in rows.basis @ point)
            tilt = math.exp(log_shape) * rows.sum_log_exact
            value += rows.failures * (log_shape + level) + tilt
            slope += rows.basis.T @ [rows.failures + tilt, rows.failures]
            bend += tilt * np.outer(rows.basis[0], rows.basis[0])
            found = rows.cluster_sums(math.exp(log_shape), level, count)
            hazard += found[0]
            for number in np.flatnonzero(rows.basis.any(axis=0)).tolist():
                by_shape, by_level = rows.basis[:, number].tolist()
                first[number] += by_shape * found[1] + by_level * found[0]
            sums.append(found)
        if self.nodes is None:
            second = self._second(sums, np.ones((1, count)))[0]
            return value - float(hazard.sum()), slope - first.sum(axis=1), bend - second
        # rows are nodes and columns clusters: there are few nodes and many clusters
        spread_hazard = self.nodes.spreads[:, None] * hazard
        mean = self._counted / (1.0 + spread_hazard)
        gain = mean * mean * self._gain
        heights = self._heights(spread_hazard)
        top = float(heights.max())
        shares = np.exp(heights - top)
        value += top + math.log(float(shares.sum()))
        shares /= shares.sum()
        slopes = -mean @ first.T  # (V, P)
        bends = np.stack([(first * each) @ first.T for each in gain]) - self._second(sums, mean)
        middle = shares @ slopes
        spread_bend = np.tensordot(shares, bends, 1) + (slopes * shares[:, None]).T @ slopes
        return value, slope + middle, bend + spread_bend - np.outer(middle, middle)

    @cached_property
    def _counted(self) -> FloatArray:
        """1 + D nu of each node and cluster, shape (V, S)."""
        assert self.nodes is not None
        return 1.0 + self.nodes.spreads[:, None] * self.failures

    @cached_property
    def _gain(self) -> FloatArray:
        assert self.nodes is not None
        return self.nodes.spreads[:, None] / self._counted

    def _heights(self, spread_hazard: FloatArray) -> FloatArray:
        """Log of prior mass times the clusters' terms for each node of nu, shape (V,); nu x hazard has shape (V, S)."""
        assert self.nodes is not None
        logs = np.log1p(spread_hazard)
        return self._rising - logs @ self.failures - logs.sum(axis=1) / self.nodes.spreads + self.nodes.log_masses

    def _second(self, sums: list[FloatArray], factors: FloatArray) -> FloatArray:
        """Sum over clusters of factor (V, S) x second derivatives of the hazard, shape (V, P, P)."""
        bends = np.zeros((len(factors), self.size, self.size))
        for rows, (hazard, by_shape, by_shape_twice) in zip(self.groups, sums, strict=True):
            twice, both, level = (factors @ part for part in (by_shape_twice, by_shape, hazard))
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
                heights[:, place] = self._rising[place] - np.log1p(spread * hazard) @ (self.failures + 1.0 / spread)
        heights += self.nodes.log_masses
        top = heights.max(axis=1)
        return total + top + np.log(np.exp(heights - top[:, None]).sum(axis=1))

    def spread(self, point: FloatArray) -> float:
        """Mean of nu given the parameters; 0 for independent lives."""
        if self.nodes is None:
            return 0.0
        heights = self.node_heights(point)
        shares = np.exp(heights - heights.max())
        return float(shares @ self.nodes.spreads / shares.sum())

    def node_heights(self, point: FloatArray) -> FloatArray:
        """Log-likelihood of each node of nu with its prior mass, up to a constant, shape (V,)."""
        assert self.nodes is not None
        hazard = np.sum([rows.sums_at(point, self.failures.size)[0] for rows in self.groups], axis=0)
        return self._heights(self.nodes.spreads[:, None] * hazard)

    def narrowed(self, point: FloatArray, within: float) -> RatioLikelihood:
        """Only the nodes of nu whose height at the point comes within so much of the highest, and one on either side:
        with thousands of clusters all others add nothing, and each costs as much as one that does."""
        if self.nodes is None or self.failures.size < MANY_CLUSTERS:
            return self
        heights = self.node_heights(point)
        high = np.flatnonzero(heights > heights.max() - within)
        kept = slice(max(int(high[0]) - 1, 0), int(high[-1]) + 2)
        return replace(self, nodes=SpreadNodes(self.nodes.spreads[kept], self.nodes.log_masses[kept]))


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
