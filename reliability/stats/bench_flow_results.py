"""What a simulated bench answers with: backlog, ready modules and turn-round, with their bands."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from reliability.stats.errors import InvalidArgument

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]
BoolArray = NDArray[np.bool_]

WEEK = 7


@dataclass(frozen=True, eq=False)
class Fan:
    """A figure at moments `days` (m,) in every replicate, values (replicates, m)."""

    days: IntArray
    values: NDArray[Any]

    @property
    def mean(self) -> FloatArray:
        """Expected value at each moment, (m,)."""
        return self.values.mean(axis=0)

    @property
    def error(self) -> FloatArray:
        """Monte-Carlo standard error of the mean, (m,)."""
        return self.values.std(axis=0, ddof=1) / math.sqrt(self.values.shape[0]) if len(self.values) > 1 else self.mean

    def quantile(self, p: float) -> FloatArray:
        """Smallest value that the share p of replicates does not exceed, (m,)."""
        if not 0 <= p <= 1:
            raise InvalidArgument(f"p is {p:g}; it must lie between 0 and 1.")
        return np.quantile(self.values, p, axis=0, method="inverted_cdf")

    def band(self, level: float) -> tuple[FloatArray, FloatArray]:
        """Equal-tailed band holding at least `level` at each moment, two of (m,)."""
        if not 0 < level < 1:
            raise InvalidArgument(f"level is {level:g}; it must be above 0 and below 1.")
        return self.quantile((1.0 - level) / 2.0), self.quantile((1.0 + level) / 2.0)

    def chance_at_most(self, value: float) -> FloatArray:
        """Share of replicates at or under a value, (m,)."""
        return (self.values <= value).mean(axis=0)

    def chance_ever_at_most(self, value: float) -> FloatArray:
        """Share of replicates that were at or under a value at this moment or an earlier one, (m,)."""
        return np.logical_or.accumulate(self.values <= value, axis=1).mean(axis=0)

    def at(self, days: ArrayLike) -> Fan:
        """The same at some of the moments."""
        wanted = np.atleast_1d(np.asarray(days, dtype=np.int64))
        place = np.searchsorted(self.days, wanted)
        if (place >= self.days.size).any() or (self.days[np.minimum(place, self.days.size - 1)] != wanted).any():
            raise InvalidArgument(f"Day {wanted.max()} is not among the {self.days.size} moments of this result.")
        return Fan(wanted, self.values[:, place])

    def less(self, other: Fan) -> Fan:
        """This minus the other, replicate by replicate: they must have met the same jobs (same seed)."""
        if self.values.shape != other.values.shape or (self.days != other.days).any():
            raise InvalidArgument("Only results with the same days and replicates can be compared.")
        return Fan(self.days, self.values.astype(np.float64) - other.values)


@dataclass(frozen=True, eq=False)
class BenchForecast:
    """Jobs of all replicates, (jobs,): moments in days from now (inf: not within the days), hours of work.

    Properties are fans over day 0 (now), 1 ... days, each the state at that day's beginning.
    """

    days: int
    replicates: int
    pool_today: int
    replicate: IntArray
    arrived: FloatArray
    available: FloatArray
    hours: FloatArray
    started_clock: FloatArray
    pace: FloatArray
    finished: FloatArray
    ready: BoolArray
    from_pool: BoolArray
    clock: FloatArray
    places: int

    @property
    def moments(self) -> IntArray:
        return np.arange(self.days + 1)

    @property
    def weeks(self) -> IntArray:
        """Day 0, 7, 14 ... and the last."""
        return np.unique(np.append(np.arange(0, self.days + 1, WEEK), self.days))

    @cached_property
    def modules(self) -> Fan:
        """Modules at the bench that are not finished, waiting for parts or not."""
        return Fan(self.moments, self._happened(self._received) - self._happened(self._ended))

    @cached_property
    def waiting_for_parts(self) -> Fan:
        """Modules of the backlog whose parts are not there yet."""
        come = np.ceil(np.maximum(self.available, 0.0))
        return Fan(self.moments, self._happened(self._received) - self._happened(np.maximum(come, self._received)))

    @cached_property
    def received(self) -> Fan:
        """Modules received since today."""
        new = self.arrived >= 0
        return Fan(self.moments, self._happened(self._received, new))

    @cached_property
    def done(self) -> Fan:
        """Modules finished since today, ready or not."""
        return Fan(self.moments, self._happened(self._ended))

    @cached_property
    def pool(self) -> Fan:
        """Ready modules on the shelf; below 0 that many places in the field wait for one."""
        taken = self._happened(self._received, self.from_pool & (self.arrived >= 0))
        return Fan(self.moments, self.pool_today + self._happened(self._ended, self.ready) - taken)

    @cached_property
    def backlog_hours(self) -> Fan:
        """Hours of work left in the backlog, at the weeks."""
        moments = self.weeks
        values = np.empty((self.replicates, moments.size))
        pace = self.pace[self.replicate]
        for column, day in enumerate(moments):
            worked = np.clip((self.clock[day] - self.started_clock) * pace, 0.0, self.hours)
            left = np.where(self._received <= day, self.hours - worked, 0.0)
            values[:, column] = np.bincount(self.replicate, left, minlength=self.replicates)
        return Fan(moments, values)

    @cached_property
    def hours_coming(self) -> FloatArray:
        """Hours of work received since today in each replicate, (replicates,)."""
        new = np.where(self.arrived >= 0, self.hours, 0.0)
        return np.bincount(self.replicate, new, minlength=self.replicates).astype(np.float64)

    @property
    def hours_offered(self) -> float:
        """Hours of work that the bench offers over all the days."""
        return float(self.clock[-1]) * self.places

    def turn_round(self, p: float, first: int = 0, last: int | None = None) -> float | None:
        """Days from receipt to the end that the share p of the jobs received from day `first` to before `last` needs.

        None where nothing is received, or where fewer than p of them end within the days: it is longer than is seen.
        """
        if not 0 < p < 1:
            raise InvalidArgument(f"p is {p:g}; it must be above 0 and below 1.")
        end = self.days if last is None else last
        mine = (self.arrived >= first) & (self.arrived < end)
        if not mine.any():
            return None
        found = float(np.quantile(self.finished[mine] - self.arrived[mine], p, method="inverted_cdf"))
        return found if math.isfinite(found) else None

    @cached_property
    def _received(self) -> FloatArray:
        """The first day whose beginning finds the module there."""
        return np.where(self.arrived < 0, 0.0, np.floor(self.arrived) + 1.0)

    @cached_property
    def _ended(self) -> FloatArray:
        """The first day whose beginning finds it finished."""
        return np.maximum(np.ceil(self.finished - 1e-9), self._received)

    def _happened(self, day: FloatArray, some: BoolArray | None = None) -> IntArray:
        """How many have happened by each day's beginning, (replicates, days + 1); what lies beyond is not counted."""
        chosen = day <= self.days
        if some is not None:
            chosen &= some
        cell = self.replicate[chosen] * (self.days + 1) + day[chosen].astype(np.int64)
        table = np.bincount(cell, minlength=self.replicates * (self.days + 1))
        return np.cumsum(table.reshape(self.replicates, self.days + 1), axis=1)
