"""How long the bench simulation takes for a fleet of the demo's size, and the hours for a target.

python -m tests.benchmarks.bench_bench_flow
"""

from __future__ import annotations

import time
from collections.abc import Callable
from typing import Any

import numpy as np

from reliability.stats.bench_flow import JobSort, OpenJob, learned_times, simulate_bench
from reliability.stats.bench_flow_hours import hours_to_target

WEEK_OF_WORK = [16.0, 16.0, 16.0, 16.0, 12.0, 0.0, 0.0]


def bench(days: int, rng: np.random.Generator) -> tuple[list[OpenJob], list[JobSort], np.ndarray]:
    """Fifty open jobs, seven modules a week of three sorts, two people."""
    nut = JobSort(
        "nut",
        rng.poisson(0.7, (2000, days)),
        learned_times(rng.lognormal(2.0, 0.6, 80)),
        parts_share=0.2,
        parts_days=learned_times([5.0, 9.0, 12.0]),
    )
    screw = JobSort("screw", np.full(days, 0.2), learned_times(rng.lognormal(2.5, 0.5, 9), typical=8.0))
    retrofit = JobSort("retrofit", np.full(days, 0.15), learned_times([4.0, 5.0], typical=8.0), takes_from_pool=False)
    queue = [OpenJob("nut", booked=3.0 * (place % 3), days_here=float(place)) for place in range(50)]
    return queue, [nut, screw, retrofit], np.resize(WEEK_OF_WORK, days)


def measured(what: str, ask: Callable[[], Any]) -> None:
    """Prints wall and processor seconds; on a shared machine the second is the one to read."""
    started = time.perf_counter(), time.process_time()
    told = ask()
    wall, own = time.perf_counter() - started[0], time.process_time() - started[1]
    print(f"{what:46} {wall:5.2f} s ({own:.2f} s of processor), {told}")


def measure_days(days: int) -> None:
    queue, sorts, hours = bench(days, np.random.default_rng(1))

    def backlog(fleet: int | None) -> str:
        found = simulate_bench(queue, sorts, hours, places=2, pool=12, fleet=fleet)
        low, high = found.modules.band(0.8)
        found.backlog_hours.band(0.8)
        empty = found.pool.chance_ever_at_most(0)[-1]
        return f"{len(found.arrived):,} jobs; at the end {low[-1]} to {high[-1]} modules, pool empty {empty:.2f}"

    def enough() -> str:
        few = [JobSort("nut", np.full(days, 0.7), sorts[0].hours), *sorts[1:]]
        found = hours_to_target(queue, few, hours, target=10, places=2).enough(0.8)
        return f"{found.hours_a_week:.0f} hours a week ({found.lower:.0f} to {found.upper:.0f})"

    measured(f"{days} days, 2,000 replicates", lambda: backlog(None))
    measured(f"{days} days, failures that feed back", lambda: backlog(320))
    measured(f"{days} days, hours for a target, 600 replicates", enough)


def main() -> None:
    for days in (91, 182):
        measure_days(days)


if __name__ == "__main__":
    main()
