"""Demand day by day in many possible futures, and when the shelf runs empty in each.

A wish for a part is met from the shelf, or from the next delivery. Whether and when the shelf runs empty depends on
the order of demand and deliveries, so it is a question about paths: the chance by a day is the share of the futures in
which a part was wanted and none was there on that day or before.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import ArrayLike, NDArray

from reliability.stats.errors import InvalidArgument

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

WEEK = 7
PACE_WEEKS = 13  # beyond the forecast a future goes on at its own pace of its last quarter


@dataclass(frozen=True, eq=False)
class DemandPaths:
    """Pieces wanted up to the end of day 0, 1 ... days, (draws, days + 1); nothing by the end of day 0.

    Day 1 is the first day of demand. known_days: those that the forecast covers; later ones are carried on.
    """

    cumulative: IntArray
    known_days: int

    @property
    def draws(self) -> int:
        return int(self.cumulative.shape[0])

    @property
    def days(self) -> int:
        return int(self.cumulative.shape[1]) - 1

    def reaching(self, days: int, rng: np.random.Generator) -> DemandPaths:
        """These paths to at least `days`, each carried on at its pace of the last 13 known weeks, Poisson.

        A path's pace is its own count drawn towards the mean of all by credibility, w = (V - m) / V with mean m and
        variance V of the counts: what is more than Poisson chance is the path's own (Bühlmann 1967, ASTIN Bulletin
        4, 199). Carrying on is an assumption; `known_days` says where it begins. Use that has stopped stays stopped.
        """
        if days <= self.days:
            return self
        span = min(PACE_WEEKS * WEEK, self.known_days)
        known = self.cumulative[:, self.known_days] - self.cumulative[:, self.known_days - span]
        mean, variance = float(known.mean()), float(known.var())
        own = max(variance - mean, 0.0) / variance if variance > 0 else 1.0
        pace = (mean + own * (known - mean)) / span
        more = rng.poisson(pace[:, None], (self.draws, days - self.days))
        after = self.cumulative[:, -1:] + np.cumsum(more, axis=1)
        return DemandPaths(np.concatenate([self.cumulative, after], axis=1), self.known_days)


def daily_paths(weekly: ArrayLike, rng: np.random.Generator) -> DemandPaths:
    """Paths from predictive draws of whole weeks, (draws, weeks) of counts, week 0 beginning today.

    Within a week each piece falls on any of its days alike; how weeks hang together within a draw is kept.
    Raises InvalidArgument.
    """
    counts = _counts(weekly)
    left = counts.copy()
    days = np.empty((*counts.shape, WEEK), dtype=np.int64)
    for day in range(WEEK):
        # a piece not yet placed falls on this day with chance 1 / days left
        days[:, :, day] = rng.binomial(left, 1.0 / (WEEK - day))
        left -= days[:, :, day]
    flat = days.reshape(counts.shape[0], -1)
    cumulative = np.concatenate([np.zeros((counts.shape[0], 1), dtype=np.int64), np.cumsum(flat, axis=1)], axis=1)
    return DemandPaths(cumulative, flat.shape[1])


def weekly_from_total(total_pmf: ArrayLike, weekly_means: ArrayLike, draws: int, rng: np.random.Generator) -> IntArray:
    """Predictive draws of weeks (draws, weeks) from the exact distribution of their total and each week's mean.

    The total is drawn as it is forecast, systematically; given the total its pieces fall into weeks in proportion to
    the means. Exact where the weeks are Poisson given a common uncertain level, or positions fail once with one time
    profile; the spread of the total is kept in every case. Raises InvalidArgument.
    """
    pmf = np.asarray(total_pmf, dtype=np.float64)
    means = np.asarray(weekly_means, dtype=np.float64)
    if pmf.ndim != 1 or not pmf.size or (pmf < -1e-9).any() or not abs(float(pmf.sum()) - 1.0) < 1e-6:
        raise InvalidArgument("The total's chances must be at least 0 and add up to 1.")
    if means.ndim != 1 or not means.size or not (np.isfinite(means).all() and (means >= 0).all()):
        raise InvalidArgument("Weekly means must be a list of finite numbers of at least 0.")
    if draws < 1:
        raise InvalidArgument(f"{draws} draws are asked for; at least 1 is needed.")
    places = (np.arange(draws) + rng.random()) / draws
    totals = np.minimum(np.searchsorted(np.cumsum(pmf), places), pmf.size - 1)
    whole = float(means.sum())
    shares = means / whole if whole > 0 else np.full(means.size, 1.0 / means.size)
    return rng.multinomial(rng.permutation(totals), shares)


@dataclass(frozen=True)
class Receipt:
    """A delivery on its way: pieces, and the day it comes in each future (draws,), whole days from today."""

    quantity: int
    days: IntArray


@dataclass(frozen=True, eq=False)
class RunningOut:
    """first_short: the day on which a part is first wanted and not there, in each future; days + 1 where never."""

    first_short: IntArray
    days: int

    @cached_property
    def chance_by_day(self) -> FloatArray:
        """Chance to have run out by the end of day 0, 1 ... days, (days + 1,)."""
        return (
            np.searchsorted(np.sort(self.first_short), np.arange(self.days + 1), side="right") / self.first_short.size
        )

    def chance_by(self, days: ArrayLike) -> float:
        """Chance to have run out by the end of a day, or before the end of another day in each future (draws,)."""
        return float((self.first_short <= np.asarray(days)).mean())

    def chance_before(self, days: ArrayLike) -> float:
        """Chance to run out before the day on which something comes, in each future (draws,) or the same in all."""
        return float((self.first_short < np.asarray(days)).mean())

    def day_over(self, chance: float) -> int | None:
        """First day by which the chance exceeds `chance`; None if it does not within the days looked at."""
        if not 0.0 <= chance < 1.0:
            raise InvalidArgument(f"The chance is {chance:g}; it must be at least 0 and below 1.")
        over = np.flatnonzero(self.chance_by_day > chance)
        return int(over[0]) if over.size else None

    def day_quantile(self, p: float) -> int | None:
        """Day by which the share p of futures has run out; None if fewer do within the days looked at."""
        if not 0.0 < p < 1.0:
            raise InvalidArgument(f"p is {p:g}; it must lie between 0 and 1.")
        found = int(np.sort(self.first_short)[max(math.ceil(p * self.first_short.size) - 1, 0)])
        return found if found <= self.days else None


def running_out(paths: DemandPaths, on_hand: int, receipts: Sequence[Receipt] = ()) -> RunningOut:
    """When each future first wants a part that is not there; a delivery serves the wishes of its own day.

    on_hand: whole number; below 0 (pieces owed) the shelf has run out today. Raises InvalidArgument.
    """
    if on_hand != int(on_hand):
        raise InvalidArgument(f"The number on hand is {on_hand:g}; it must be a whole number.")
    shelf = int(on_hand) - paths.cumulative
    for receipt in receipts:
        days = np.broadcast_to(np.asarray(receipt.days), (paths.draws,))
        if receipt.quantity != int(receipt.quantity) or receipt.quantity < 0 or (days < 0).any():
            raise InvalidArgument("A delivery must bring a whole number of pieces of at least 0, today or later.")
        shelf = shelf + receipt.quantity * (np.arange(paths.days + 1) >= days[:, None])
    short = shelf < 0
    first = np.where(short.any(axis=1), short.argmax(axis=1), paths.days + 1)
    return RunningOut(first.astype(np.int64), paths.days)


def _counts(weekly: ArrayLike) -> IntArray:
    given = np.asarray(weekly)
    if given.ndim != 2 or not given.shape[0] or not given.shape[1]:
        raise InvalidArgument(f"Draws have shape {given.shape}; they must be a table of draws and weeks.")
    if not np.isfinite(given).all() or (given < 0).any() or (given != np.floor(given)).any():
        raise InvalidArgument("Weekly draws must be whole counts of at least 0.")
    return given.astype(np.int64)
