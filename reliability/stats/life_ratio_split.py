"""Cutting lives at the day a comparison begins: what came before tells about places, what comes after about parts."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from reliability.stats.errors import InvalidArgument
from reliability.stats.lifetimes import BoolArray, FloatArray, IntArray, Lifetimes


@dataclass(frozen=True, eq=False)
class SplitLives:
    """The lives from their start of comparison on, and their past; None where nothing is left of one.

    now_rows, past_rows: row numbers of the given lives, to take other columns (positions) along.
    """

    now: Lifetimes | None
    now_rows: IntArray
    past: Lifetimes | None
    past_rows: IntArray


def split_at_start(lifetimes: Lifetimes, concurrent_from: ArrayLike) -> SplitLives:
    """Each life cut at an age: the earlier piece ends there good, the later one enters there.

    concurrent_from: age on the day the comparison began, 0 where the part was fitted later, the duration or more where
    the life was over by then; shape (n,). An interval failure belongs to the piece in which it was found.
    Raises InvalidArgument for ages below 0.
    """
    begin = np.broadcast_to(np.asarray(concurrent_from, dtype=float), (len(lifetimes),))
    if not (begin >= 0.0).all():
        raise InvalidArgument("The ages at which the comparison begins must be at least 0.")
    over = begin >= lifetimes.durations
    now_rows = np.flatnonzero(~over)
    past_rows = np.flatnonzero(begin > lifetimes.entries)
    now = _piece(lifetimes, now_rows, np.maximum(lifetimes.entries, begin), lifetimes.durations, lifetimes.observed)
    ends = np.minimum(begin, lifetimes.durations)
    return SplitLives(
        now, now_rows, _piece(lifetimes, past_rows, lifetimes.entries, ends, lifetimes.observed & over), past_rows
    )


def _piece(
    lifetimes: Lifetimes, rows: IntArray, entries: FloatArray, ends: FloatArray, observed: BoolArray
) -> Lifetimes | None:
    if rows.size == 0:
        return None
    cut = lifetimes.subset(rows)
    observed = observed[rows]
    last_good = np.where(observed, np.maximum(cut.last_good, entries[rows]), np.nan)
    return cut.recut(ends[rows], observed, entries[rows], last_good)
