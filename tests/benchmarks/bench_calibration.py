"""Do the bands hold? PIT and CRPS of the forecast on fleets whose truth is known, beside constant rate x fleet x
Poisson.

python -m tests.benchmarks.bench_calibration [--fleets 600] [--case NAME ...] [--further] [--seed 1]
"""

from __future__ import annotations

import argparse
import sys
import time
from collections.abc import Iterable
from dataclasses import dataclass, field

import numpy as np
from scipy.special import gammaln

from reliability.stats.counts import CountForecast, forecast_counts
from reliability.stats.kept_draws import KeptDraws
from reliability.stats.life_posterior import life_posterior
from reliability.stats.scoring import crps, randomised_pit
from tests.benchmarks.calibration_fleets import NEW_SITE, Case, Fleet, make_fleet

SCOPES = ("all", "old site", NEW_SITE)

CASES: dict[str, Case] = {
    "many, young": Case(shape=2.5, scale=90.0, deployed=(10, 100)),
    "many, mature": Case(shape=2.0, scale=80.0, deployed=(300, 600)),
    "5 to 15 failures": Case(
        shape=(1.2, 3.0), scale=(150.0, 500.0), sites=8, positions=12, deployed=(10, 150), keep=lambda n: 5 <= n <= 15
    ),
    "two to three lives": Case(shape=2.0, scale=40.0, deployed=(30, 200)),
    "sites differ 0.3": Case(shape=2.0, scale=100.0, spread=0.3, deployed=(10, 200)),
    "sites differ 1": Case(shape=2.0, scale=100.0, spread=1.0, deployed=(10, 200)),
    "late records": Case(shape=2.0, scale=100.0, deployed=(150, 400), records_from=60.0),
    "visits every 14 days": Case(shape=2.0, scale=80.0, deployed=(30, 200), visits=14.0),
    "visits every 28 days": Case(shape=2.0, scale=80.0, deployed=(30, 200), visits=28.0),
    "removed with others": Case(shape=2.0, scale=100.0, deployed=(30, 250), other_removals=1 / 120),
    "planned replacement": Case(shape=2.5, scale=100.0, deployed=(30, 250), replace_at=80.0),
    "duty 20 %": Case(shape=2.0, scale=100.0, deployed=(30, 200), duty_spread=0.2, past_duty=(0.6, 1.6)),
    "lognormal lives": Case(scale=80.0, deployed=(30, 250), lognormal=True),
    "infants 10 %": Case(shape=2.5, scale=100.0, deployed=(30, 200), infants=0.1),
    "exponential, few": Case(
        shape=1.0, scale=(400.0, 1500.0), sites=8, positions=12, deployed=(10, 200), keep=lambda n: 5 <= n <= 15
    ),
    "0 to 2 failures": Case(
        shape=(1.2, 3.0), scale=(200.0, 1200.0), sites=6, positions=10, deployed=(10, 150), keep=lambda n: n <= 2
    ),
    **{
        f"3 to 7 failures, shape {shape}": Case(
            shape=shape, scale=(120.0, 400.0), sites=6, positions=12, deployed=(10, 120), keep=lambda n: 3 <= n <= 7
        )
        for shape in (1.8, 2.5, 3.5)
    },
}

# Mixtures and corners that no case above was made for: what holds there holds by method, not by chance.
FURTHER: dict[str, Case] = {
    "sites differ 0.5, 5 to 15 failures": Case(
        shape=(1.2, 3.0),
        scale=(150.0, 500.0),
        spread=0.5,
        sites=8,
        positions=12,
        deployed=(10, 150),
        keep=lambda n: 5 <= n <= 15,
    ),
    "late records, removals, sites differ": Case(
        shape=2.2, scale=90.0, spread=0.4, deployed=(150, 500), records_from=90.0, other_removals=1 / 200
    ),
    "visits and planned replacement": Case(shape=2.5, scale=90.0, deployed=(30, 250), visits=21.0, replace_at=84.0),
    "short lives, removals, sites differ": Case(
        shape=1.8, scale=45.0, spread=0.3, deployed=(20, 160), other_removals=1 / 90
    ),
    "lognormal, 8 to 25 failures": Case(
        scale=200.0, sites=8, positions=12, deployed=(10, 160), lognormal=True, keep=lambda n: 8 <= n <= 25
    ),
    "infants 15 %, 15 to 40 failures": Case(
        shape=3.0, scale=250.0, sites=8, positions=15, deployed=(20, 200), infants=0.15, keep=lambda n: 15 <= n <= 40
    ),
    "falling hazard": Case(shape=0.75, scale=150.0, deployed=(30, 300)),
    "two old sites, unequal duty": Case(
        shape=2.0, scale=120.0, sites=2, positions=60, deployed=(30, 250), duty_spread=0.15, past_duty=(0.5, 2.0)
    ),
}


@dataclass
class Scores:
    """PIT values, CRPS of the forecast and of the rival, and widths, by scope."""

    pit: dict[str, list[float]] = field(default_factory=lambda: {scope: [] for scope in SCOPES})
    crps: dict[str, list[float]] = field(default_factory=lambda: {scope: [] for scope in SCOPES})
    rival: dict[str, list[float]] = field(default_factory=lambda: {scope: [] for scope in SCOPES})
    expected: dict[str, list[float]] = field(default_factory=lambda: {scope: [] for scope in SCOPES})
    actual: dict[str, list[float]] = field(default_factory=lambda: {scope: [] for scope in SCOPES})
    width: dict[str, list[float]] = field(default_factory=lambda: {scope: [] for scope in SCOPES})


def forecast(case: Case, fleet: Fleet, rng: np.random.Generator) -> CountForecast:
    """The forecast as the program makes it: early failures looked for, site spread, removals by their rate, and its
    numbers of draws.
    """
    posterior = life_posterior(fleet.records, site_spread=True, rounded_up_to=1.0)
    unplanned = 0.0 if np.isfinite(case.replace_at) else fleet.removals / fleet.observed_time
    return forecast_counts(
        KeptDraws.of(posterior, 400, rng),
        fleet.ages,
        fleet.horizons,
        sites=fleet.sites,
        groups=fleet.sites,
        draws=400 if fleet.records.failures < 20 else 100 if fleet.records.failures < 200 else 50,
        rng=rng,
        other_removals=unplanned,
        visits=fleet.visits,
        replace_at=case.replace_at if np.isfinite(case.replace_at) else None,
        duty_spread=case.duty_spread,
        refit_delay=0.5,
    )


def poisson(mean: float) -> np.ndarray:
    """Probabilities of a Poisson count."""
    counts = np.arange(int(mean + 12 * np.sqrt(mean) + 20))
    if mean == 0:
        return (counts == 0).astype(float)
    pmf = np.exp(counts * np.log(mean) - mean - gammaln(counts + 1))
    return pmf / pmf.sum()


def score(case: Case, fleets: int, seed: int) -> Scores:
    """Scores of one case."""
    rng = np.random.default_rng(seed)
    scores = Scores()
    for _ in range(fleets):
        fleet = make_fleet(case, rng)
        found = forecast(case, fleet, rng)
        counts = {
            "all": found.failures,
            "old site": found.by_group[fleet.old_site].failures,
            NEW_SITE: found.by_group[NEW_SITE].failures,
        }
        rate = fleet.records.failures / fleet.records.exposure
        share = {"all": 1.0, "old site": fleet.sites == fleet.old_site, NEW_SITE: fleet.sites == NEW_SITE}
        for scope, distribution in counts.items():
            outcome = fleet.outcomes[scope]
            scores.pit[scope].append(float(randomised_pit(distribution.pmf, outcome, rng)))
            scores.crps[scope].append(float(crps(distribution.pmf, outcome)))
            scores.rival[scope].append(
                float(crps(poisson(rate * float((fleet.horizons * share[scope]).sum())), outcome))
            )
            scores.expected[scope].append(distribution.quantile(0.5))
            scores.actual[scope].append(outcome)
            low, high = distribution.interval(0.8)
            scores.width[scope].append(high - low)
    return scores


TITLE = (
    "| case | where | PIT80 | low | high | actual | median | 80 % width | CRPS | rival's CRPS is |\n"
    "|---|---|---|---|---|---|---|---|---|---|"
)


def lines(name: str, scores: Scores) -> Iterable[str]:
    """The table's lines of one case, as Markdown; PIT80 with its standard error."""
    for scope in SCOPES:
        pit = np.array(scores.pit[scope])
        inside = np.mean((pit > 0.1) & (pit < 0.9))
        error = np.sqrt(inside * (1.0 - inside) / pit.size)
        ratio = np.mean(scores.rival[scope]) / max(np.mean(scores.crps[scope]), 1e-12)
        actual, median = np.mean(scores.actual[scope]), np.mean(scores.expected[scope])
        yield (
            f"| {name if scope == 'all' else ''} | {scope} | {inside:.3f} ± {error:.3f} | {np.mean(pit <= 0.1):.3f} "
            f"| {np.mean(pit >= 0.9):.3f} | {actual:.2f} | {median:.2f} "
            f"| {np.mean(scores.width[scope]):.1f} | {np.mean(scores.crps[scope]):.3f} | {ratio:.2f} times |"
        )


def main() -> None:
    """Print the table."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--fleets", type=int, default=600)
    parser.add_argument("--case", action="append", choices=[*CASES, *FURTHER])
    parser.add_argument("--further", action="store_true", help="the mixtures and corners instead of the listed cases")
    parser.add_argument("--seed", type=int, default=1)
    chosen = parser.parse_args()
    every = CASES | FURTHER
    print(TITLE, flush=True)
    for name in chosen.case or (FURTHER if chosen.further else CASES):
        started = time.perf_counter()
        scores = score(every[name], chosen.fleets, chosen.seed)
        print("\n".join(lines(name, scores)), flush=True)
        each = 1000 * (time.perf_counter() - started) / chosen.fleets
        print(f"{name}: {chosen.fleets} fleets, {each:.0f} ms each", file=sys.stderr, flush=True)


if __name__ == "__main__":
    main()
