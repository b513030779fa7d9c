"""How often 95 % intervals of the median hold the truth where 16 sites differ, with site spread and without.

Run with a number of fleets (`bench_site_coverage.py 1000`); 200 otherwise. Each interval is held against the median of
which it speaks: with site spread that of the typical site (multiplier 1), for independent lives that of a part
anywhere. In the first design each site has 18 lives, all seen to their failure; in the others parts are placed over a
while and watched to one day, as in a fleet's records.
"""

from __future__ import annotations

import math
import sys
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from reliability.stats.lifetimes import Lifetimes
from reliability.stats.weibull_fit import fit_weibull

SITES, SHAPE, SCALE = 16, 2.0, 100.0


def fleet(rng: np.random.Generator, spread: float, each: int, longest: float) -> Lifetimes:
    """Parts placed over a while at each site and watched to one day, `longest` after the first."""
    multipliers = rng.gamma(1.0 / spread, spread, SITES)
    site = np.repeat(np.arange(SITES), each)
    ages = SCALE * (rng.exponential(size=site.size) / multipliers[site]) ** (1.0 / SHAPE)
    ends = rng.uniform(0.0, longest, site.size) + 1e-6 if math.isfinite(longest) else np.full(site.size, math.inf)
    return Lifetimes(np.minimum(ages, ends), ages <= ends, sites=site)


def main() -> None:
    fleets = int(sys.argv[1]) if len(sys.argv) > 1 else 200
    print(f"{fleets} fleets each; share of 95 % intervals for the median that hold the truth, in per cent")
    print("each of which it speaks; beside it the independent one for the typical site, and the shape with site spread")
    print("parts a site  watched  spread  failures   site spread   independent   (typical site)   shape")
    for longest, each in ((math.inf, 18), (250.0, 12), (250.0, 30)):
        for spread in (0.1, 0.3, 1.0):
            typical = SCALE * math.log(2.0) ** (1.0 / SHAPE)
            anywhere = SCALE * ((2.0**spread - 1.0) / spread) ** (1.0 / SHAPE)
            held, failures = np.zeros(4), 0.0
            for number in range(fleets):
                lives = fleet(np.random.default_rng([number % 4, number]), spread, each, longest)
                failures += lives.failures / fleets
                fit = fit_weibull(lives, site_spread=True)
                site, shape = fit.interval("median"), fit.interval("shape")
                plain = fit_weibull(lives).interval("median")
                held += [
                    site.lower <= typical <= site.upper,
                    plain.lower <= anywhere <= plain.upper,
                    plain.lower <= typical <= plain.upper,
                    shape.lower <= SHAPE <= shape.upper,
                ]
            shares = 100.0 * held / fleets
            print(
                f"{each:12d} {longest:8.0f} {spread:7.1f} {failures:9.0f} {shares[0]:13.1f} {shares[1]:13.1f} "
                f"{shares[2]:16.1f} {shares[3]:7.1f}",
                flush=True,
            )


if __name__ == "__main__":
    main()
