"""Do the bench's bands hold? Benches whose truth is known, forecast from what little was recorded of them."""

from __future__ import annotations

import numpy as np
import pytest

from reliability.stats.bench_flow import JobSort, OpenJob, arrivals_from_failures, learned_times, simulate_bench
from tests.stats.slow_bench import slow_bench

DAYS, TRIALS, REPLICATES = 42, 160, 120
CALENDAR = [8.0, 8.0, 8.0, 8.0, 8.0, 0.0, 0.0] * 6


def truth(rng: np.random.Generator, level: float, share: float, middle: float, spread: float) -> tuple[float, float]:
    """Backlog and hours left after six weeks of one bench, followed event by event."""
    coming = rng.poisson(level * share / 7.0, DAYS)
    moments = np.repeat(np.arange(DAYS), coming) + rng.random(coming.sum())
    hours = np.concatenate([rng.lognormal(middle, spread, 8), rng.lognormal(middle, spread, moments.size)])
    arrived = np.concatenate([np.full(8, -1.0), np.sort(moments)])
    jobs = list(zip(arrived, arrived, hours, strict=True))
    finished = slow_bench(jobs, CALENDAR, 1)
    done = [told is not None for told in finished]
    return len(jobs) - sum(done), float(hours.sum())


@pytest.mark.parametrize("recorded", [5, 40], ids=["few recorded", "many recorded"])
def test_bands_hold_at_their_rate(recorded: int) -> None:
    rng = np.random.default_rng(recorded)
    modules, hours = [], []
    for trial in range(TRIALS):
        level, share = rng.gamma(25.0, 0.4), rng.beta(4, 4)  # failures a week, and what comes of them to the bench
        middle, spread = rng.normal(np.log(6.0), 0.4), 0.5
        of = 30
        came = rng.binomial(of, share)
        drawn = rng.poisson(rng.gamma(25.0, 0.4, (300, 1)), (300, 6))
        arrivals = arrivals_from_failures(drawn, came, of, REPLICATES, rng)
        times = learned_times(rng.lognormal(middle, spread, recorded), typical=6.0)
        sort = JobSort("nut", arrivals, times)
        queue = [OpenJob("nut", days_here=1.0) for _ in range(8)]
        found = simulate_bench(queue, [sort], CALENDAR, replicates=REPLICATES, seed=trial)
        left, worked = truth(rng, level, share, middle, spread)
        course = found.modules.values[:, -1]
        # counts tie, so the rank is drawn within the tie
        modules.append((course < left).mean() + rng.random() * (course == left).mean())
        total = np.bincount(found.replicate, found.hours, REPLICATES)
        hours.append((total < worked).mean())
    for ranks in (np.array(modules), np.array(hours)):
        # 160 trials: the error of a share of 0.8 is 0.032
        assert ((ranks > 0.1) & (ranks < 0.9)).mean() == pytest.approx(0.8, abs=0.095)
        assert ranks.mean() == pytest.approx(0.5, abs=0.07)
