"""What the mean cumulative function of positions would be if every part were as good as the last: renewal."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from reliability.stats.count_kernel import Transform
from reliability.stats.errors import InvalidArgument
from reliability.stats.lifetimes import FloatArray
from reliability.stats.recurrence_histories import Histories

# rows x ages held at once
CHUNK = 4_000_000


@dataclass(frozen=True, eq=False)
class RenewalExpectation:
    """Expected mean cumulative function at `times` (cells + 1,), from 0 to the end of the longest history.

    expected_failures: by the end, over all units as they were observed; compare it with the failures seen. Both rest on
    the fitted life as if it were known.
    """

    times: FloatArray
    mean: FloatArray
    expected_failures: float

    def mean_at(self, ages: ArrayLike) -> FloatArray:
        """Expected mean number of failures by the ages, shape as given; level beyond the last."""
        return np.interp(np.asarray(ages, dtype=float), self.times, self.mean)


def renewal_expectation(
    fit: Any,
    histories: Histories,
    *,
    entry_ages: ArrayLike = 0,
    removals: float = 0.0,
    cells: int = 400,
) -> RenewalExpectation:
    """Expected mean cumulative function of positions whose every part has the fitted life, observed as the histories.

    A position whose part is aged a at its start s is expected to fail H_a(t - s) times by age t:
    H_a = F_a + F_a * h, F_a(u) = 1 - S(a + u) / S(a), h the renewal density from new (Cox, Renewal Theory (1962),
    chapter 4). Increments are averaged over the positions at risk at each age, as the estimate itself does.

    fit: a fitted life with `.survival(ages)`, or a function of ages giving S. One unit is one position with one part.
    entry_ages: age of the part in place at each start, scalar or shape (n,); NaN where unknown: the position then
    counts as renewed since its own age 0. removals: rate at which parts are taken out for other reasons (planned, taken
    with another), which also makes them new. Errors fall with the square of the cell, (longest history) / cells.
    """
    survival: Callable[[Any], Any] = getattr(fit, "survival", fit)
    count, end = len(histories), float(histories.ends.max())
    ages = np.broadcast_to(np.asarray(entry_ages, dtype=float), (count,))
    if (ages < 0.0).any():
        raise InvalidArgument(f"An age at the start of observation is {np.nanmin(ages):g}; it must be at least 0.")
    if not (np.isfinite(removals) and removals >= 0.0):
        raise InvalidArgument(f"The rate of other removals is {removals:g}; it must be at least 0.")
    if cells < 8:
        raise InvalidArgument(f"{cells} cells are too few; ask for at least 8.")
    step = end / (2 * cells)  # half a cell: masses stand at the middles of cells
    unknown = np.isnan(ages)
    begins = np.where(unknown, 0, np.round(histories.starts / step)).astype(np.int64)
    aged = np.where(unknown, 0, np.round(ages / step)).astype(np.int64)
    distinct_ages, age_row = np.unique(aged, return_inverse=True)
    by_age = _expected_from(survival, distinct_ages * step, step, cells, removals)
    times = 2.0 * step * np.arange(cells + 1)
    increments, at_risk = _averaged(by_age, age_row, begins, histories, times)
    rate = np.divide(increments, at_risk, out=np.zeros(cells), where=at_risk > 0.0)
    return RenewalExpectation(times, np.append(0.0, np.cumsum(rate)), float(increments.sum()))


def _expected_from(
    survival: Callable[[Any], Any], ages: FloatArray, step: float, cells: int, removals: float
) -> FloatArray:
    """Expected failures by each half cell for parts of the given ages at the start, shape (A, 2 cells + 1)."""
    u = step * np.arange(2 * cells + 1)
    transform = Transform(u.size)
    gone = np.exp(-removals * u)

    def split(age: float) -> tuple[FloatArray, FloatArray]:
        """Cumulative failures and masses of any end of the part, by u."""
        left = np.asarray(survival(age + u), dtype=float)
        left = left / left[0] if left[0] > 0.0 else np.where(u > 0.0, 0.0, 1.0)
        staying = 0.5 * (gone[1:] + gone[:-1])  # not removed before failing
        failed = np.append(0.0, np.cumsum(-np.diff(left) * staying))
        masses = np.zeros(u.size)
        masses[1::2] = -np.diff((left * gone)[::2])
        return failed, masses

    from_new, ends = split(0.0)
    new = transform.back(transform.forward(from_new) / (1.0 - transform.forward(ends)))
    parts = [split(float(age)) for age in ages]
    failed, masses = (np.stack(column) for column in zip(*parts, strict=True))
    return failed + transform.back(transform.forward(masses) * transform.forward(new))


def _averaged(
    by_age: FloatArray, age_row: NDArray[np.int64], begins: NDArray[np.int64], histories: Histories, times: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Expected failures in each cell over the units at risk there, and the units at risk, shapes (cells,)."""
    cells, width = times.size - 1, times[1]
    increments, at_risk = np.zeros(cells), np.zeros(cells)
    edges = 2 * np.arange(cells + 1)
    key, row = np.unique(np.stack([age_row, begins]), axis=1, return_inverse=True)
    row = row.ravel()
    order = np.argsort(row, kind="stable")
    chunk = max(1, CHUNK // (cells + 1))
    bounds = np.searchsorted(row[order], np.arange(0, key.shape[1] + chunk, chunk))
    for number, (low, high) in enumerate(pairwise(bounds)):
        first = number * chunk
        rows = key[:, first : first + chunk]
        since = np.maximum(edges[None, :] - rows[1][:, None], 0)
        expected = np.diff(by_age[rows[0][:, None], since], axis=1)
        present = np.zeros((rows.shape[1], cells))
        who = order[low:high]
        for column, sign in ((histories.ends, 1.0), (histories.starts, -1.0)):
            # whole cells before the age, and the share of the cell it lies in
            cell = np.minimum((column[who] / width).astype(np.int64), cells - 1)
            share = np.minimum(column[who] / width - cell, 1.0)
            whole = np.zeros((rows.shape[1], cells + 1))
            np.add.at(whole, (row[who] - first, cell), histories.weights[who])
            present += sign * (np.cumsum(whole[:, ::-1], axis=1)[:, ::-1][:, 1:])
            np.add.at(present, (row[who] - first, cell), sign * share * histories.weights[who])
        present = np.maximum(present, 0.0)
        increments += (present * expected).sum(axis=0)
        at_risk += present.sum(axis=0)
    return increments, at_risk
