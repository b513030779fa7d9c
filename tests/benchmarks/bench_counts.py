"""How long the exact count takes: 10,000 and 1,000,000 positions, 91 days, 100 draws, 50 sites; with and without weeks.

python -m tests.benchmarks.bench_counts
"""

from __future__ import annotations

import time

import numpy as np

from reliability.stats.counts import forecast_counts
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.posterior import weibull_posterior

SITES = 50


def records(rng: np.random.Generator) -> Lifetimes:
    """Four thousand lives of parts at fifty sites that differ."""
    factor = rng.gamma(1 / 0.3, 0.3, SITES)
    site = rng.integers(0, SITES, 4000)
    life = np.ceil(150.0 * factor[site] ** (-1 / 2.2) * rng.weibull(2.2, site.size))
    watched = rng.integers(20, 600, site.size)
    labels = np.array([f"S{number:02d}" for number in range(SITES)])
    return Lifetimes(np.minimum(life, watched), life <= watched, sites=labels[site]).grouped()


def main() -> None:
    """Print wall and processor seconds; on a shared machine the second is the one to read."""
    rng = np.random.default_rng(1)
    lives = records(rng)
    started = time.perf_counter(), time.process_time()
    posterior = weibull_posterior(lives, site_spread=True)
    wall, own = time.perf_counter() - started[0], time.process_time() - started[1]
    print(
        f"posterior of {lives.count:.0f} lives, {SITES} sites: {1000 * wall:.0f} ms ({1000 * own:.0f} ms of processor)"
    )
    for windows in (None, np.arange(0, 92, 7)):
        for count in (1_000, 10_000, 1_000_000):
            ages = rng.integers(0, 600, count)
            sites = lives.site_labels[rng.integers(0, SITES, count)]
            started = time.perf_counter(), time.process_time()
            found = forecast_counts(
                posterior,
                ages,
                91.0,
                sites=sites,
                groups=sites,
                windows=windows,
                draws=100,
                rng=np.random.default_rng(2),
            )
            wall, own = time.perf_counter() - started[0], time.process_time() - started[1]
            weeks = "by site" if windows is None else "by site and by week"
            print(
                f"{count:9,} positions, {weeks:20} {wall:6.2f} s ({own:.2f} s of processor), "
                f"mean {found.failures.mean:,.0f}, 80 % band {found.failures.interval(0.8)}"
            )


if __name__ == "__main__":
    main()
