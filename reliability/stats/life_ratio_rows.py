"""Cumulative hazards of one group's Weibull lives by site or position, quick for few rows and for a million."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from reliability.stats.lifetimes import FloatArray, IntArray, Lifetimes
from reliability.stats.weibull_likelihood import LARGEST_LOG_HAZARD

MANY_ROWS = 20_000
# moments hold the sums for shapes within this share of their centre, and for so large a change of the greatest exponent
WINDOW, REACH = 0.15, 0.7
TERMS = 12  # of the series: REACH^12 / 12! and WINDOW^12 / sqrt(24 pi) are below 2e-11


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


def group_rows(
    lifetimes: Lifetimes, clusters: IntArray, log_reference: float, basis: FloatArray
) -> GroupRows | GroupMoments:
    if len(lifetimes) >= MANY_ROWS:
        return group_moments(lifetimes, clusters, log_reference, basis)
    return sorted_rows(lifetimes, clusters, log_reference, basis)


def sorted_rows(lifetimes: Lifetimes, clusters: IntArray, log_reference: float, basis: FloatArray) -> GroupRows:
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
class GroupMoments:
    """The same for many rows: sums of t^shape by cluster from a Taylor series about a shape, whose terms
    sum w t^centre (log t)^k are added up once for all shapes near it; the centre moves along with the search."""

    lifetimes: Lifetimes
    row_clusters: IntArray
    log_reference: float
    failures: float
    sum_log_exact: float
    basis: FloatArray

    @cached_property
    def exact(self) -> GroupRows:
        return sorted_rows(self.lifetimes, self.row_clusters, self.log_reference, self.basis)

    @property
    def log_ages(self) -> FloatArray:
        return self.exact.log_ages

    @cached_property
    def _rows(self) -> tuple[FloatArray, FloatArray, IntArray, float]:
        """Log ages of ends and late entries, their signed weights, their clusters, and the greatest log age."""
        late = self.lifetimes.entries > 0
        logs = _logs(self.lifetimes.durations, self.log_reference)
        greatest = float(logs.max())
        weights = np.asarray(self.lifetimes.weights, dtype=float)
        if late.any():
            logs = np.concatenate([logs, _logs(self.lifetimes.entries[late], self.log_reference)])
            weights = np.concatenate([weights, -weights[late]])
            return logs, weights, np.concatenate([self.row_clusters, self.row_clusters[late]]), greatest
        return logs, weights, self.row_clusters, greatest

    @cached_property
    def _centre(self) -> dict[str, FloatArray]:
        return {}

    def _moments(self, shape: float, count: int) -> tuple[float, FloatArray]:
        """The centre of the series that serves the shape, and its moments, shape (TERMS + 2, count)."""
        logs, weights, clusters, greatest = self._rows
        kept = self._centre
        if kept:
            centre = float(kept["at"][0])
            off = abs(shape - centre)
            if off <= WINDOW * centre and off * max(greatest, 0.0) <= REACH:
                return centre, kept["moments"]
        with np.errstate(over="ignore", invalid="ignore", under="ignore"):
            powers = np.exp(np.minimum(shape * logs, LARGEST_LOG_HAZARD)) * weights
            moments = np.empty((TERMS + 2, count))
            for order in range(TERMS + 2):
                moments[order] = np.bincount(clusters, weights=powers, minlength=count)
                powers *= logs
        kept.update(at=np.array([shape]), moments=moments)
        return shape, moments

    def _series(self, shapes: FloatArray, centre: float, orders: int) -> FloatArray:
        """Coefficients of the moments for the sums of x^order t^shape, shape (draws, orders, TERMS + 2)."""
        terms = np.arange(TERMS)
        factorial = np.array([math.factorial(term) for term in terms.tolist()], dtype=float)
        powers = (shapes[:, None] - centre) ** terms / factorial
        made = np.zeros((shapes.size, orders, TERMS + 2))
        for order in range(orders):
            made[:, order, order : order + TERMS] = powers
        return made

    def sums_at(self, point: FloatArray, count: int) -> FloatArray:
        log_shape, level = self.basis @ point
        return self.cluster_sums(math.exp(log_shape), float(level), count)

    def cluster_sums(self, shape: float, level: float, count: int) -> FloatArray:
        """Cumulative hazard of each cluster, its slope and second derivative in log shape, shape (3, count)."""
        centre, moments = self._moments(shape, count)
        plain, once, twice = self._series(np.array([shape]), centre, 3)[0] @ moments
        scale = math.exp(min(level, LARGEST_LOG_HAZARD))
        sums = np.stack([plain * scale, once * (scale * shape), (twice * shape + once) * (scale * shape)])
        sums[0] = np.maximum(sums[0], 0.0)
        return sums

    def hazards(self, shapes: FloatArray, levels: FloatArray, count: int) -> FloatArray:
        """Cumulative hazard of each cluster for many (shape, level), shape (draws, count)."""
        centre, moments = self._moments(float(np.median(shapes)), count)
        off = float(np.abs(shapes - centre).max())
        if off > WINDOW * centre or off * max(self._rows[3], 0.0) > REACH:
            return self.exact.hazards(shapes, levels, count)
        sums = self._series(shapes, centre, 1)[:, 0] @ moments
        return np.maximum(sums, 0.0) * np.exp(np.minimum(levels, LARGEST_LOG_HAZARD))[:, None]


def _logs(ages: FloatArray, log_reference: float) -> FloatArray:
    return np.log(ages) - log_reference


def group_moments(lifetimes: Lifetimes, clusters: IntArray, log_reference: float, basis: FloatArray) -> GroupMoments:
    exact = lifetimes.observed
    logs = np.log(lifetimes.durations[exact]) - log_reference
    sum_log = float(lifetimes.weights[exact] @ logs)
    return GroupMoments(lifetimes, clusters, log_reference, lifetimes.failures, sum_log, basis)
