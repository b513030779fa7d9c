"""The log-rank evidence at many looks in one pass: what was known of each life on each day."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from reliability.stats.errors import InvalidArgument, UnsupportedRows
from reliability.stats.lifetimes import BoolArray, FloatArray, IntArray, Lifetimes
from reliability.stats.ranks import as_whole, ranked

CLOSE = 1e-9  # a share of whole days may come out a hair below the whole number
TABLE = 24  # a table of strata and ages may have so many cells a life, beyond which keys are searched


@dataclass(frozen=True, eq=False)
class PathOfLooks:
    """score and information as of `Look`, shape (L,); seen: False where no life had gained an age yet, shape (L,)."""

    score: FloatArray
    information: FloatArray
    seen: BoolArray


def path_of_looks(
    lifetimes: Lifetimes, is_new: ArrayLike, strata: IntArray, begun: FloatArray, ended: FloatArray, days: ArrayLike
) -> PathOfLooks:
    """Scores of old against new parts and their variances on each day, each stratum compared within itself.

    is_new, strata (numbers), begun, ended (calendar days of each life): shape (n,); days: rising, shape (L,), inf for
    all that is known. On a day a life that had not ended yet counts as withdrawn at the whole age that it had on a
    straight line from entry to duration; one that had not begun counts for nothing. The sums are those of `take_look`
    on the lives so cut: Mantel, Cancer Chemotherapy Reports 50 (1966) 163-170.

    Nobody at risk ever leaves the risk set of an age on a later day, so from look to look only those are counted anew
    that were running, and an age at which old or new parts are not even at risk in the end is left away.
    Raises UnsupportedRows for rows with last_good, InvalidArgument for days that do not rise.
    """
    if lifetimes.has_intervals:
        raise UnsupportedRows(
            "Some rows failed somewhere between two ages. Use counted_when_found where old and new are visited alike."
        )
    looks = np.asarray(days, dtype=float)
    if looks.size and not (np.diff(looks) > 0.0).all():
        raise InvalidArgument("The days of the looks must rise.")
    lives = _Running(lifetimes.entries, lifetimes.durations, np.asarray(begun, float), np.asarray(ended, float))
    seen = _seen(lives, looks)
    kept = _comparable(np.asarray(is_new, dtype=bool), strata, lifetimes.observed)
    if not kept.size:
        return PathOfLooks(np.zeros(looks.size), np.zeros(looks.size), seen)
    score, information = _scores(
        lives.chosen(kept),
        np.asarray(is_new, dtype=bool)[kept],
        ranked(strata[kept])[1],
        lifetimes.observed[kept],
        np.asarray(lifetimes.weights)[kept],
        looks,
    )
    return PathOfLooks(score, information, seen)


@dataclass(frozen=True, eq=False)
class _Running:
    entries: FloatArray
    durations: FloatArray
    begun: FloatArray
    ended: FloatArray

    def chosen(self, rows: IntArray) -> _Running:
        return _Running(*(column[rows] for column in (self.entries, self.durations, self.begun, self.ended)))

    def ages_on(self, day: float, rows: IntArray) -> FloatArray:
        """Ages on the day of lives that end later."""
        entries, begun = self.entries[rows], self.begun[rows]
        share = np.clip((day - begun) / np.maximum(self.ended[rows] - begun, 1.0), 0.0, 1.0)
        return np.floor(entries + share * (self.durations[rows] - entries) + CLOSE)


def _seen(lives: _Running, looks: FloatArray) -> BoolArray:
    seen = np.zeros(looks.size, dtype=bool)
    for place, day in enumerate(looks.tolist()):
        there = np.flatnonzero(lives.begun < day)
        if (lives.ended[there] <= day).any() or (lives.ages_on(day, there) > lives.entries[there]).any():
            seen[place:] = True
            break
    return seen


def _comparable(new: BoolArray, strata: IntArray, failed: BoolArray) -> IntArray:
    """Rows of strata with both kinds of part and a failure; the others add nothing."""
    codes = ranked(strata)[1]
    count = int(codes.max(initial=-1)) + 1
    held = np.ones(count, dtype=bool)
    for which in (new, ~new, failed):
        held &= np.bincount(codes[which], minlength=count) > 0
    return np.flatnonzero(held[codes])


class _Keys:
    """The failure ages of each stratum in order, and how many of them lie at or below an age of a stratum."""

    def __init__(self, strata: IntArray, ages: FloatArray, failed: BoolArray) -> None:
        self.distinct = None if as_whole(ages) is not None else np.unique(ages[failed])
        self.width = int(self._places(ages).max()) + 2
        composite = strata[failed] * self.width + self._places(ages[failed])
        self.keys = ranked(composite)[0]
        cells = (int(strata.max()) + 1) * self.width
        self.below: IntArray | None = None
        if cells <= TABLE * strata.size:
            there = np.zeros(cells, dtype=np.int32)
            there[self.keys] = 1
            self.below = np.cumsum(there, dtype=np.int32)

    def _places(self, ages: FloatArray) -> IntArray:
        if self.distinct is None:
            return ages.astype(np.int64)
        return np.searchsorted(self.distinct, ages, side="right").astype(np.int64)

    def upto(self, strata: IntArray, ages: FloatArray) -> IntArray:
        composite = strata * self.width + self._places(ages)
        if self.below is not None:
            return self.below[composite].astype(np.int64)
        return np.searchsorted(self.keys, composite, side="right").astype(np.int64)

    def keep(self, kept: BoolArray) -> None:
        self.keys = self.keys[kept]
        if self.below is not None:
            self.below = np.append(0, np.cumsum(kept))[self.below].astype(np.int32)


def _scores(
    lives: _Running, new: BoolArray, strata: IntArray, failed: BoolArray, weights: FloatArray, looks: FloatArray
) -> tuple[FloatArray, FloatArray]:
    keys = _Keys(strata, lives.durations, failed)
    sides = new.astype(np.int64)
    first, last = keys.upto(strata, lives.entries), keys.upto(strata, lives.durations)
    keys.keep(_both_at_risk(first, last, sides, weights, keys.keys.size))
    if not keys.keys.size:
        return np.zeros(looks.size), np.zeros(looks.size)
    first, last = keys.upto(strata, lives.entries), keys.upto(strata, lives.durations)
    at_end = np.zeros(len(strata), dtype=np.int64)
    own = np.flatnonzero(failed)
    composite = strata[own] * keys.width + keys._places(lives.durations[own])
    at_end[own] = last[own] - 1
    dies = np.zeros(len(strata), dtype=bool)
    dies[own] = (last[own] > 0) & (keys.keys[np.maximum(last[own] - 1, 0)] == composite)
    # those that reach no age at which both are ever at risk play no part
    rows = np.flatnonzero(last > first)
    lives, strata, sides, weights = lives.chosen(rows), strata[rows], sides[rows], weights[rows]
    first, last, dies, at_end = first[rows], last[rows], dies[rows], at_end[rows]
    begins = np.searchsorted(looks, lives.begun, side="right")
    ends = np.searchsorted(looks, lives.ended, side="left")
    order = np.argsort(begins, kind="stable")
    until = np.searchsorted(begins[order], np.arange(looks.size + 1), side="left")
    count = keys.keys.size
    changes, died = np.zeros((2, count + 1)), np.zeros((2, count))
    reached = first.copy()
    score, information = np.zeros(looks.size), np.zeros(looks.size)
    active = np.zeros(0, dtype=np.int64)
    for look, day in enumerate(looks.tolist()):
        active = np.concatenate([active, order[until[look] : until[look + 1]]])
        over = ends[active] <= look
        to = last[active]
        running = active[~over]
        moved = keys.upto(strata[running], lives.ages_on(day, running))
        to[~over] = np.clip(moved, first[running], last[running])
        was, cells, own = reached[active], sides[active] * (count + 1), weights[active]
        flat = np.bincount(cells + was, weights=own, minlength=changes.size)
        flat -= np.bincount(cells + to, weights=own, minlength=changes.size)
        changes += flat.reshape(changes.shape)
        reached[active] = to
        fell = active[over & dies[active]]
        cells = sides[fell] * count + at_end[fell]
        died += np.bincount(cells, weights=weights[fell], minlength=died.size).reshape(died.shape)
        score[look], information[look] = _sums(died, np.cumsum(changes, axis=1)[:, :-1])
        active = running
    return score, information


def _both_at_risk(first: IntArray, last: IntArray, sides: IntArray, weights: FloatArray, count: int) -> BoolArray:
    """Which keys have both kinds of part at risk in the end."""
    cells = sides * (count + 1)
    changes = np.bincount(cells + first, weights=weights, minlength=2 * (count + 1)).astype(float)
    changes -= np.bincount(cells + last, weights=weights, minlength=2 * (count + 1))
    at_risk = np.cumsum(changes.reshape(2, count + 1), axis=1)[:, :-1]
    kept: BoolArray = (at_risk > 1e-9 * weights.max()).all(axis=0)
    return kept


def _sums(died: FloatArray, at_risk: FloatArray) -> tuple[float, float]:
    """Failures of old parts less those expected, and the variance: row 0 old, row 1 new; with ties hypergeometric.

    Where one kind of part is not at risk, all that failed was expected to.
    """
    some = np.flatnonzero((died[0] + died[1] > 0.0) & (at_risk[0] > 0.0) & (at_risk[1] > 0.0))
    fell, old = died[0, some], at_risk[0, some]
    failures, every = fell + died[1, some], old + at_risk[1, some]
    share = old / every
    size = failures * np.maximum(every - failures, 0.0) / np.where(every > 1.0, every - 1.0, 1.0)
    return float((fell - failures * share).sum()), max(float((size * share * (1.0 - share)).sum()), 0.0)
