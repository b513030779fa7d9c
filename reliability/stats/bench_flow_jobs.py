"""The jobs of a bench in many possible futures: those there today, and those that come.

Every job that might come is drawn beforehand with its moment, hours, wait for parts and fate; each sort of job has a
random stream of its own, named by the sort. So two what-ifs meet the same jobs (common random numbers: Law & Kelton
2000, Simulation Modeling and Analysis, 3rd ed., section 11.2), and their difference is far surer than either.
"""

from __future__ import annotations

import math
import zlib
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from reliability.stats.bench_flow_times import PreparedTimes, RecordedTimes
from reliability.stats.errors import InvalidArgument

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]
BoolArray = NDArray[np.bool_]

WEEK = 7
MOST_JOBS = 20_000_000  # in all replicates together: some gigabytes
_JUST_NOW = 1e-9  # days: what is there today came before what comes


@dataclass(frozen=True, eq=False)
class JobSort:
    """One sort of job.

    arrivals: expected number on each day, (days,), then Poisson; or whole numbers drawn before, (1, days) alike in all
    replicates or (replicates, days). hours: of a job. parts_share: chance that a job waits for parts first;
    parts_days: how long. ready_share: chance to leave as ready (else scrapped or withdrawn). takes_from_pool: a ready
    module is wanted in its place.
    """

    name: str
    arrivals: ArrayLike
    hours: RecordedTimes
    parts_share: float = 0.0
    parts_days: RecordedTimes | None = None
    ready_share: float = 1.0
    takes_from_pool: bool = True


@dataclass(frozen=True)
class OpenJob:
    """A job there today. booked: hours so far; hours_left: where it is known, else drawn from its sort beyond what is
    booked. waited_for_parts: days so far, None if it waits for none; parts_in: days until they come, where known.
    days_here: since it was received.
    """

    sort: str
    booked: float = 0.0
    hours_left: float | None = None
    waited_for_parts: float | None = None
    parts_in: float | None = None
    days_here: float = 0.0


@dataclass(frozen=True, eq=False)
class Jobs:
    """Flat arrays (jobs,) in the order of (day available, replicate, moment available). Times in days from now.

    arrived: below 0 for what is there today. fate: uniform, for losing those that cannot come.
    """

    replicate: IntArray
    arrived: FloatArray
    available: FloatArray
    hours: FloatArray
    ready: BoolArray
    from_pool: BoolArray
    fate: FloatArray
    replicates: int

    def __len__(self) -> int:
        return int(self.replicate.size)


def arrivals_from_failures(
    weekly_failures: ArrayLike, came: float, of: float, replicates: int, rng: np.random.Generator
) -> IntArray:
    """Modules that come to the bench on each day, (replicates, 7 weeks), from predictive draws of failures (draws,
    weeks) of one mode.

    came, of: how many of its failures brought a module in so far; the share of a replicate is drawn from
    Beta(came + 1/2, of - came + 1/2) (Jeffreys 1946), so that few records leave it uncertain. Each failure comes on
    any day of its week alike. Replicates take the draws in their order, so that modes drawn together stay together.
    Raises InvalidArgument.
    """
    weekly = np.asarray(weekly_failures)
    if weekly.ndim != 2 or not weekly.size or (weekly < 0).any() or (weekly != np.floor(weekly)).any():
        raise InvalidArgument("Failures must be a table of whole counts, draws by weeks.")
    if not 0 <= came <= of or not math.isfinite(of):
        raise InvalidArgument(f"{came:g} of {of:g} failures cannot have brought a module in.")
    _refuse_replicates(replicates)
    counts = weekly[np.arange(replicates) * weekly.shape[0] // replicates].astype(np.int64)
    share = rng.beta(came + 0.5, of - came + 0.5, replicates)
    coming = rng.binomial(counts, share[:, None])
    days = np.empty((replicates, weekly.shape[1], WEEK), dtype=np.int64)
    for day in range(WEEK):
        days[:, :, day] = rng.binomial(coming, 1.0 / (WEEK - day))
        coming = coming - days[:, :, day]
    return days.reshape(replicates, -1)


def draw_jobs(queue: Sequence[OpenJob], sorts: Sequence[JobSort], days: int, replicates: int, seed: int) -> Jobs:
    """Every job that is there or might come within `days`, drawn once."""
    _refuse_replicates(replicates)
    if days != int(days) or days < 1:
        raise InvalidArgument(f"{days:g} days are asked for; give a whole number of at least 1.")
    names = [sort.name for sort in sorts]
    if len(set(names)) != len(names):
        raise InvalidArgument("Two sorts of jobs have the same name; each must be given once.")
    missing = sorted({job.sort for job in queue} - set(names))
    if missing:
        raise InvalidArgument(f"Open jobs are of sort {missing[0]}, of which no hours are given.")
    expected = replicates * (len(queue) + sum(_expected(sort) for sort in sorts))
    if expected > MOST_JOBS:
        raise InvalidArgument(
            f"{expected:,.0f} jobs would be simulated; at most {MOST_JOBS:,} can be. Ask for fewer replicates or days."
        )
    columns = [_coming(sort, days, replicates, seed) for sort in sorts]
    columns += _there(queue, {sort.name: sort for sort in sorts}, replicates, seed)
    if not columns:
        nothing = np.zeros(0)
        columns = [_column(np.zeros(0, dtype=np.int64), nothing, nothing, nothing, np.zeros(0, dtype=bool), False)]
    joined = [np.concatenate(parts) for parts in zip(*columns, strict=True)]
    day = np.floor(joined[2])
    # one sort: by day, replicate and moment within the day; jobs of one moment keep the order in which they stand
    order = np.argsort(day * replicates + joined[0] + (joined[2] - day), kind="stable")
    replicate, arrived, available, hours, ready, from_pool, fate = (values[order] for values in joined)
    return Jobs(replicate, arrived, available, hours, ready, from_pool, fate, replicates)


Column = tuple[IntArray, FloatArray, FloatArray, FloatArray, BoolArray, BoolArray, FloatArray]


def _coming(sort: JobSort, days: int, replicates: int, seed: int) -> Column:
    rng = _stream(seed, sort.name)
    hours = _hours(sort, replicates, seed)
    waits = None if sort.parts_days is None else sort.parts_days.prepared(replicates, rng)
    _refuse_share(sort.parts_share, f"share of {sort.name} jobs that wait for parts")
    _refuse_share(sort.ready_share, f"share of {sort.name} jobs that end ready")
    if sort.parts_share > 0 and waits is None:
        raise InvalidArgument(f"{sort.name} jobs may wait for parts, but not for how long: give parts_days.")
    counts = _counts(sort, days, replicates, rng)
    cell = np.repeat(np.arange(counts.size), counts.ravel())
    replicate, day = np.divmod(cell, days)
    arrived = day + rng.random(cell.size)
    wait = np.zeros(cell.size)
    if waits is not None:
        must = rng.random(cell.size) < sort.parts_share
        wait = np.where(must, waits.draws(replicate, rng), 0.0)
    ready = rng.random(cell.size) < sort.ready_share
    needed, fate = hours.draws(replicate, rng), rng.random(cell.size)
    return _column(replicate, arrived, arrived + wait, needed, ready, sort.takes_from_pool, fate)


def _there(queue: Sequence[OpenJob], sorts: dict[str, JobSort], replicates: int, seed: int) -> list[Column]:
    """Today's jobs in every replicate: begun ones first, then by the day they were received."""
    rng = _stream(seed, "")
    hours = {name: _hours(sorts[name], replicates, seed) for name in dict.fromkeys(job.sort for job in queue)}
    columns = []
    ordered = sorted(queue, key=lambda job: (job.booked <= 0, -job.days_here))
    for job in ordered:
        sort = sorts[job.sort]
        for value, name in ((job.booked, "hours booked"), (job.days_here, "days since it was received")):
            if not (math.isfinite(value) and value >= 0):
                raise InvalidArgument(f"The {name} of a job are {value:g}; they must be at least 0.")
        left = _left(job, hours[job.sort], replicates, rng)
        available = _parts_come(job, sort, replicates, rng)
        ready = rng.random(replicates) < sort.ready_share
        arrived = np.full(replicates, -max(float(job.days_here), _JUST_NOW))
        columns.append(_column(np.arange(replicates), arrived, available, left, ready, False))
    return columns


def _hours(sort: JobSort, replicates: int, seed: int) -> PreparedTimes:
    """The same in both places: a replicate in which jobs take long has them long in the queue and later."""
    return sort.hours.prepared(replicates, _stream(seed, f"hours of {sort.name}"))


def _left(job: OpenJob, hours: PreparedTimes, replicates: int, rng: np.random.Generator) -> FloatArray:
    drawn = hours.left(job.booked, replicates, rng)  # drawn in any case, so that what-ifs keep in step
    if job.hours_left is None:
        return drawn
    if not (math.isfinite(job.hours_left) and job.hours_left >= 0):
        raise InvalidArgument(f"{job.hours_left:g} hours are left of a job; they must be at least 0.")
    return np.full(replicates, float(job.hours_left))


def _parts_come(job: OpenJob, sort: JobSort, replicates: int, rng: np.random.Generator) -> FloatArray:
    if job.parts_in is not None:
        if not (math.isfinite(job.parts_in) and job.parts_in >= 0):
            raise InvalidArgument(f"The parts of a job come in {job.parts_in:g} days; it must be at least 0.")
        return np.full(replicates, float(job.parts_in))
    if job.waited_for_parts is None:
        return np.zeros(replicates)
    if sort.parts_days is None:
        raise InvalidArgument(f"A {sort.name} job waits for parts, but it is not known how long: give parts_days.")
    return sort.parts_days.prepared(replicates, rng).left(float(job.waited_for_parts), replicates, rng)


def _column(
    replicate: IntArray,
    arrived: FloatArray,
    available: FloatArray,
    hours: FloatArray,
    ready: BoolArray,
    from_pool: bool,
    fate: FloatArray | None = None,
) -> Column:
    size = replicate.size
    return (
        replicate,
        arrived,
        available,
        hours,
        ready,
        np.full(size, from_pool),
        np.zeros(size) if fate is None else fate,
    )


def _expected(sort: JobSort) -> float:
    """Jobs of a sort in one replicate."""
    given = np.asarray(sort.arrivals, dtype=np.float64)
    total = float(given.sum()) / (given.shape[0] if given.ndim == 2 and given.shape[0] else 1)
    return total if math.isfinite(total) else 0.0


def _counts(sort: JobSort, days: int, replicates: int, rng: np.random.Generator) -> IntArray:
    given = np.asarray(sort.arrivals, dtype=np.float64)
    if given.ndim not in (1, 2) or given.shape[-1] != days or not np.isfinite(given).all() or (given < 0).any():
        raise InvalidArgument(f"Arrivals of {sort.name} must be {days} numbers of at least 0, one for each day.")
    if given.ndim == 1:
        return rng.poisson(given, (replicates, days))
    if given.shape[0] not in (1, replicates) or (given != np.floor(given)).any():
        raise InvalidArgument(f"Arrivals of {sort.name} must be whole numbers in 1 or {replicates} rows.")
    return np.broadcast_to(given.astype(np.int64), (replicates, days))


def _stream(seed: int, name: str) -> np.random.Generator:
    return np.random.default_rng(np.random.SeedSequence([seed, zlib.crc32(name.encode())]))


def _refuse_share(value: float, name: str) -> None:
    if not 0.0 <= value <= 1.0:
        raise InvalidArgument(f"The {name} is {value:g}; it must lie between 0 and 1.")


def _refuse_replicates(replicates: int) -> None:
    if replicates != int(replicates) or replicates < 1:
        raise InvalidArgument(f"{replicates:g} replicates are asked for; give a whole number of at least 1.")
