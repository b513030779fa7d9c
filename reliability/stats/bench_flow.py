"""The rework bench day by day in many possible futures, from today's queue.

Jobs are worked on in the order in which they can be (received, and parts there), each by one person until it is
finished; `places` people work side by side. Working time runs on a clock of its own that stands still on closed days:
a job available at the working hour v starts at max(v, the earliest hour at which a place is free) and ends its hours
later (Kiefer & Wolfowitz 1955, Trans. Am. Math. Soc. 78, 1). Exact for any arrivals, hours and calendar; no steps.

Where modules that cannot be replaced stop failing (no ready one is left), failures of a day come with the share of
modules that run on it; so the bench's backlog feeds back on what comes in.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike, NDArray

from reliability.stats.bench_flow_jobs import Jobs, JobSort, OpenJob, arrivals_from_failures, draw_jobs
from reliability.stats.bench_flow_results import BenchForecast
from reliability.stats.bench_flow_times import RecordedTimes, fixed_time, learned_times
from reliability.stats.errors import InvalidArgument
from reliability.stats.queues import erlang_b, erlang_c, finite_source_queue

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

__all__ = [
    "BenchForecast",
    "JobSort",
    "OpenJob",
    "RecordedTimes",
    "arrivals_from_failures",
    "erlang_b",
    "erlang_c",
    "finite_source_queue",
    "fixed_time",
    "learned_times",
    "run_jobs",
    "simulate_bench",
]

REPLICATES = 2000
_A_MOMENT = 1e-9  # of the clock: sums of hours must not end a breath after the day they fill


def simulate_bench(
    queue: Sequence[OpenJob],
    sorts: Sequence[JobSort],
    hours_by_day: ArrayLike,
    *,
    places: int = 1,
    pool: int = 0,
    fleet: int | None = None,
    replicates: int = REPLICATES,
    seed: int = 0,
) -> BenchForecast:
    """Backlog, turn-round and ready modules over the coming days.

    queue: jobs there today. sorts: every sort of job, with what comes. hours_by_day: hours of work on each day, all
    people together, 0 on closed days, (days,). places: people who work side by side, one job each; a job gets at
    most hours / places a day. pool: ready modules today. fleet: modules that should run; given, those without a
    replacement do not fail. Same seed and sorts: same jobs, so that what-ifs can be compared. Raises InvalidArgument.
    """
    hours = _capacity(hours_by_day, places)
    if pool != int(pool) or pool < 0:
        raise InvalidArgument(f"The pool holds {pool:g} modules; it must be a whole number of at least 0.")
    if fleet is not None and (fleet != int(fleet) or fleet < 1):
        raise InvalidArgument(f"{fleet:g} modules should run; it must be a whole number of at least 1.")
    jobs = draw_jobs(queue, sorts, hours.size, replicates, seed)
    return run_jobs(jobs, hours, places, pool, fleet)


def run_jobs(
    jobs: Jobs, hours: FloatArray, places: int, pool: int, fleet: int | None, *, pace: FloatArray | None = None
) -> BenchForecast:
    """The bench's course for drawn jobs; pace: factor on the hours of every day, one a replicate (replicates,)."""
    work = jobs.hours if pace is None else jobs.hours / pace[jobs.replicate]
    clock = np.concatenate([[0.0], np.cumsum(hours / places)])
    bench = _Bench(jobs, work, clock, places)
    if fleet is None:
        bench.serve_all()
    else:
        bench.serve_with_feedback(pool, fleet)
    return BenchForecast(
        days=hours.size,
        replicates=jobs.replicates,
        pool_today=int(pool),
        replicate=jobs.replicate[bench.kept],
        arrived=jobs.arrived[bench.kept],
        available=jobs.available[bench.kept],
        hours=jobs.hours[bench.kept],
        started_clock=bench.started[bench.kept],
        pace=np.ones(jobs.replicates) if pace is None else pace,
        finished=bench.finished[bench.kept],
        ready=jobs.ready[bench.kept],
        from_pool=jobs.from_pool[bench.kept],
        clock=clock,
        places=places,
    )


class _Bench:
    """Places and when each comes free, for all replicates at once."""

    def __init__(self, jobs: Jobs, work: FloatArray, clock: FloatArray, places: int) -> None:
        self.jobs, self.work, self.clock = jobs, work, clock
        self.days = clock.size - 1
        self.free = np.zeros((jobs.replicates, places))
        self.started = np.full(len(jobs), np.inf)
        self.finished = np.full(len(jobs), np.inf)
        self.kept = np.ones(len(jobs), dtype=bool)
        # jobs stand in the order of the day on which they can be worked on
        self.edges = np.searchsorted(np.floor(jobs.available), np.arange(self.days + 1))
        moment = np.clip(jobs.available, 0.0, self.days)
        day = np.minimum(moment.astype(np.int64), self.days - 1)
        self.ready_at = clock[day] + (moment - day) * (clock[day + 1] - clock[day])

    def serve_all(self) -> None:
        for day in range(self.days):
            self._serve(np.arange(self.edges[day], self.edges[day + 1]))

    def serve_with_feedback(self, pool: int, fleet: int) -> None:
        """Each day first loses the failures of modules that do not run, then works."""
        jobs = self.jobs
        coming = np.flatnonzero(jobs.arrived >= 0)
        coming = coming[np.argsort(np.floor(jobs.arrived[coming]), kind="stable")]
        edges = np.searchsorted(np.floor(jobs.arrived[coming]), np.arange(self.days + 1))
        self.back = np.zeros((jobs.replicates, self.days + 1), dtype=np.int64)
        here = np.full(jobs.replicates, pool, dtype=np.int64)
        for day in range(self.days):
            here += self.back[:, day]
            running = np.clip(fleet + np.minimum(here, 0), 0, fleet) / fleet
            mine = coming[edges[day] : edges[day + 1]]
            self.kept[mine] = ~jobs.from_pool[mine] | (jobs.fate[mine] < running[jobs.replicate[mine]])
            taking = mine[self.kept[mine] & jobs.from_pool[mine]]
            here -= np.bincount(jobs.replicate[taking], minlength=jobs.replicates)
            today = np.arange(self.edges[day], self.edges[day + 1])
            self._serve(today[self.kept[today]], count_ready=True)

    def _serve(self, today: IntArray, *, count_ready: bool = False) -> None:
        """Gives the jobs of a day their places: the first of every replicate at once, then the second, and so on."""
        replicate = self.jobs.replicate[today]
        new = np.ones(today.size, dtype=bool)
        new[1:] = replicate[1:] != replicate[:-1]
        position = np.arange(today.size)
        rank = position - np.maximum.accumulate(np.where(new, position, 0))
        order = np.argsort(rank, kind="stable")
        ends = np.cumsum(np.bincount(rank)) if today.size else np.zeros(0, dtype=np.int64)
        begin = 0
        for end in ends:
            chosen = today[order[begin:end]]
            self._assign(chosen, count_ready)
            begin = end

    def _assign(self, jobs: IntArray, count_ready: bool) -> None:
        rows = self.jobs.replicate[jobs]
        if self.free.shape[1] == 1:
            place, earliest = 0, self.free[rows, 0]
        else:
            waiting = self.free[rows]
            place = waiting.argmin(axis=1)
            earliest = waiting[np.arange(rows.size), place]
        start = np.maximum(self.ready_at[jobs], earliest)
        end = start + self.work[jobs]
        self.free[rows, place] = end
        self.started[jobs] = start
        # the first moment at which the clock shows the end
        index = np.searchsorted(self.clock, end - _A_MOMENT)
        inside = (index >= 1) & (index <= self.days)
        index = np.clip(index, 1, self.days)
        span = self.clock[index] - self.clock[index - 1]
        moment = index - 1 + (end - self.clock[index - 1]) / np.where(span > 0, span, 1.0)
        finished = np.where(inside, np.minimum(moment, index), np.inf)
        # a job without work, on a closed day, is finished when it can be begun
        finished = np.where(end <= _A_MOMENT, 0.0, finished)
        self.finished[jobs] = np.maximum(finished, self.jobs.available[jobs])
        if count_ready:
            done = inside & self.jobs.ready[jobs]
            self.back[rows[done], index[done]] += 1


def _capacity(hours_by_day: ArrayLike, places: int) -> FloatArray:
    hours = np.asarray(hours_by_day, dtype=np.float64)
    if hours.ndim != 1 or not hours.size or not np.isfinite(hours).all() or (hours < 0).any():
        raise InvalidArgument("Hours of work must be a list with a number of at least 0 for each day.")
    if not math.isfinite(places) or places != int(places) or places < 1:
        raise InvalidArgument(f"{places:g} people work side by side; it must be a whole number of at least 1.")
    return hours
