"""How many hours a week bring the backlog under its target by a day, and what a change of plan does.

In each replicate the backlog on a day falls as hours rise, so each has its own least number of hours; it is found by
bisection, in all replicates at once, on the same jobs. The share of replicates that need at most h is the chance that
h is enough: the answer carries all that is uncertain about what comes and how long it takes.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import ndtri

from reliability.stats.bench_flow import run_jobs
from reliability.stats.bench_flow_jobs import JobSort, OpenJob, draw_jobs
from reliability.stats.bench_flow_results import BenchForecast, Fan
from reliability.stats.errors import InvalidArgument

FloatArray = NDArray[np.float64]

REPLICATES = 600
MOST_FACTOR = 16.0  # of the hours now planned; whoever needs more has no bench
_STEPS = 12


@dataclass(frozen=True)
class HoursNeeded:
    """Hours a week that are enough with a chance; lower, upper: 95 % limits from the number of replicates.

    None: no number of hours does it with this chance, because jobs wait for parts or come too late.
    """

    chance: float
    hours_a_week: float | None
    lower: float | None
    upper: float | None


@dataclass(frozen=True, eq=False)
class HoursToTarget:
    """needed: hours a week in each replicate (inf: none are enough), (replicates,); planned: those of the calendar."""

    target: int
    by_day: int
    planned: float
    needed: FloatArray

    @property
    def chance_as_planned(self) -> float:
        """Chance that the planned hours are enough."""
        return self.chance(self.planned)

    def chance(self, hours_a_week: float) -> float:
        """Chance that so many hours a week are enough."""
        return float((self.needed <= hours_a_week * (1.0 + 1e-9)).mean())

    def enough(self, chance: float) -> HoursNeeded:
        """The hours that are enough with this chance; limits by order statistics.

        David & Nagaraja 2003, Order Statistics, 3rd ed., section 7.1.
        """
        if not 0.0 < chance < 1.0:
            raise InvalidArgument(f"The chance is {chance:g}; it must lie between 0 and 1.")
        count = self.needed.size
        ordered = np.sort(self.needed)
        reach = float(ndtri(0.975)) * math.sqrt(count * chance * (1.0 - chance))
        places = (count * chance, count * chance - reach, count * chance + reach)
        at, lower, upper = (float(ordered[int(np.clip(math.ceil(place) - 1, 0, count - 1))]) for place in places)
        return HoursNeeded(chance, *(value if math.isfinite(value) else None for value in (at, lower, upper)))


def hours_to_target(
    queue: Sequence[OpenJob],
    sorts: Sequence[JobSort],
    hours_by_day: ArrayLike,
    *,
    target: int,
    by_day: int | None = None,
    places: int = 1,
    replicates: int = REPLICATES,
    seed: int = 0,
) -> HoursToTarget:
    """Hours a week that bring the backlog to at most `target` modules by a day (the last one if None).

    hours_by_day: the calendar, whose days are all longer or shorter by one factor; places as in simulate_bench: more
    hours are longer days or shifts of as many people. Failures come as if every module ran, which errs towards more
    hours. Raises InvalidArgument.
    """
    hours = np.asarray(hours_by_day, dtype=np.float64)
    if hours.ndim != 1 or not hours.size or not np.isfinite(hours).all() or (hours < 0).any():
        raise InvalidArgument("Hours of work must be a list with a number of at least 0 for each day.")
    if target != int(target) or target < 0:
        raise InvalidArgument(f"The target is {target:g}; it must be a whole number of at least 0.")
    last = hours.size if by_day is None else by_day
    if last != int(last) or not 1 <= last <= hours.size:
        raise InvalidArgument(f"Day {last:g} is not among the {hours.size} days of the calendar.")
    hours = hours[: int(last)]
    if not hours.sum() > 0:
        raise InvalidArgument("The bench is closed on every day until then. Give a calendar with open days.")
    jobs = draw_jobs(queue, sorts, hours.size, replicates, seed)

    def is_enough(factor: FloatArray) -> NDArray[np.bool_]:
        course = run_jobs(jobs, hours, places, 0, None, pace=factor)
        return course.modules.values[:, -1] <= target

    low, high = np.zeros(replicates), np.full(replicates, MOST_FACTOR)
    possible = is_enough(high)
    for _ in range(_STEPS):
        # finer where factors are small: the step is about 1 % of the hours
        middle = np.where(low > 0.25, np.sqrt(np.maximum(low, 1e-9) * high), 0.5 * (low + high))
        fine = is_enough(middle)
        low, high = np.where(fine, low, middle), np.where(fine, middle, high)
    planned = 7.0 * float(hours.sum()) / hours.size
    return HoursToTarget(int(target), int(last), planned, np.where(possible, planned * high, np.inf))


@dataclass(frozen=True, eq=False)
class Difference:
    """What a change of plan does: figures of the change minus those of the base, on the same jobs."""

    modules: Fan
    backlog_hours: Fan
    pool: Fan


def difference(changed: BenchForecast, base: BenchForecast) -> Difference:
    """Compared replicate by replicate; both must come from the same seed, sorts and days. Raises InvalidArgument."""
    return Difference(
        changed.modules.less(base.modules),
        changed.backlog_hours.less(base.backlog_hours),
        changed.pool.less(base.pool),
    )
