"""Do the bands hold where many ages are not known? Each way to treat them, on fleets whose truth is known.

Two thirds of a fleet are on record from the start. At the other sites records began lately: of every part fitted
before, only that it was there then is known, and its life teaches nothing.

python -m tests.benchmarks.bench_unknown_ages [--fleets 200] [--case NAME ...] [--way NAME ...] [--seed 1]
"""

from __future__ import annotations

import argparse
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from reliability.stats.counts import CountDistribution, forecast_counts
from reliability.stats.kept_draws import KeptDraws
from reliability.stats.life_posterior import life_posterior
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.scoring import crps, randomised_pit
from tests.benchmarks.calibration_fleets import Case, make_fleet

SITES, LATE_SITES = 8, 4
LATE_DEPLOYED = (200.0, 900.0)
CASES: dict[str, tuple[Case, tuple[int, int]]] = {
    "many failures": (Case(shape=2.0, scale=100.0, deployed=(10, 200), records_from=60.0), (1, 10**9)),
    "5 to 15 failures": (Case(shape=(1.2, 3.0), scale=(150.0, 700.0), deployed=(10, 200), records_from=60.0), (5, 15)),
    "1 to 4 failures": (Case(shape=(1.2, 3.0), scale=(250.0, 1500.0), deployed=(10, 200), records_from=60.0), (1, 4)),
    "no failure": (Case(shape=(1.2, 3.0), scale=(400.0, 3000.0), deployed=(10, 200), records_from=60.0), (0, 0)),
}
WAYS = ("true ages", "least known", "any age", "since built", "first part", "before")


@dataclass(frozen=True, eq=False)
class Mixed:
    """What is known of both kinds of sites, and what then happened."""

    lives: Lifetimes
    ages: Any
    horizons: Any
    sites: Any
    least: float
    unknown: Any
    deployed: Any
    outcome: int


def mixed_fleet(case: Case, rng: np.random.Generator) -> Mixed:
    """Both kinds of sites with one truth."""
    shape, scale = (
        float(np.exp(rng.uniform(*np.log(each)))) if isinstance(each, tuple) else each
        for each in (case.shape, case.scale)
    )
    same = replace(case, shape=shape, scale=scale, positions=10)
    whole = make_fleet(replace(same, sites=SITES - 1, records_from=None), rng)
    late = make_fleet(replace(same, sites=LATE_SITES - 1, deployed=LATE_DEPLOYED), rng)
    began = case.records_from or 0.0
    ages = np.concatenate([whole.ages, late.ages])
    is_late = np.arange(ages.size) >= whole.ages.size
    return Mixed(
        lives=whole.records,
        ages=ages,
        horizons=np.concatenate([whole.horizons, late.horizons]),
        sites=np.concatenate([whole.sites, np.char.add("late ", late.sites)]),
        least=began,
        unknown=is_late & (ages > began),
        deployed=np.concatenate([whole.deployed, late.deployed]),
        outcome=late.outcomes["all"],
    )


def ages_by(way: str, fleet: Mixed, life: Any) -> tuple[Any, Any, Any, Any]:
    """Ages, the most they can be, weights, and the position of each line."""
    unknown = fleet.unknown
    ages = np.where(unknown, fleet.least, fleet.ages)
    everyone, one = np.arange(ages.size), np.ones(ages.size)
    if way == "true ages":
        return fleet.ages, 0.0, one, everyone
    if way == "least known":
        return ages, 0.0, one, everyone
    if way == "any age":
        return ages, np.where(unknown, np.inf, 0.0), one, everyone
    if way == "since built":
        return ages, np.where(unknown, fleet.deployed, 0.0), one, everyone
    if way == "first part":
        return np.where(unknown, fleet.deployed, ages), 0.0, one, everyone
    return spread_over(life, fleet.least, ages, unknown)


def spread_over(life: Any, began: float, ages: Any, unknown: Any) -> tuple[Any, Any, Any, Any]:
    """One spread of ages for all draws, with steps by the number of failures."""
    from reliability.stats.count_compound import ages_at_least

    everyone = np.arange(ages.size)
    if life.failures == 0:
        return ages, 0.0, np.ones(ages.size), everyone
    longest = np.inf if life.failures >= 5 else 3.0 * began
    nodes, shares = ages_at_least(life.draws(40, np.random.default_rng(0)), began, longest=longest)
    known, not_known = everyone[~unknown], everyone[unknown]
    line = np.concatenate([known, np.repeat(not_known, nodes.size)])
    return (
        np.concatenate([ages[known], np.tile(nodes, not_known.size)]),
        0.0,
        np.concatenate([np.ones(known.size), np.tile(shares, not_known.size)]),
        line,
    )


def forecast(way: str, fleet: Mixed, life: Any, seed: int) -> CountDistribution:
    """Failures at the sites with late records."""
    ages, oldest, weights, line = ages_by(way, fleet, life)
    late = np.char.startswith(fleet.sites[line], "late")
    found = forecast_counts(
        life,
        ages[late],
        fleet.horizons[line][late],
        sites=fleet.sites[line][late],
        weights=weights[late],
        oldest=np.broadcast_to(oldest, ages.shape)[late],
        draws=200 if life.failures < 20 else 50,
        rng=np.random.default_rng(seed),
        refit_delay=0.5,
    )
    return found.failures


def main() -> None:
    """Print a table."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--fleets", type=int, default=200)
    parser.add_argument("--case", action="append", choices=list(CASES))
    parser.add_argument("--way", action="append", choices=WAYS)
    parser.add_argument("--seed", type=int, default=1)
    chosen = parser.parse_args()
    ways = chosen.way or WAYS
    print("| case | ages | PIT80 | low | high | actual | median | 80 % width | CRPS |\n|" + 9 * "---|")
    for name in chosen.case or CASES:
        rng = np.random.default_rng(chosen.seed)
        rows: dict[str, list[tuple[float, ...]]] = {way: [] for way in ways}
        case, (least, most) = CASES[name]
        number = 0
        while number < chosen.fleets:
            fleet = mixed_fleet(case, rng)
            if not least <= fleet.lives.failures <= most:
                continue
            number += 1
            life = KeptDraws.of(life_posterior(fleet.lives, rounded_up_to=1.0), 400, rng)
            for way in ways:
                found = forecast(way, fleet, life, number)
                low, high = found.interval(0.8)
                pit = float(randomised_pit(found.pmf, fleet.outcome, np.random.default_rng(number)))
                score = float(crps(found.pmf, fleet.outcome))
                rows[way].append((pit, fleet.outcome, found.quantile(0.5), high - low, score))
        for way, seen in rows.items():
            pit, actual, median, width, score = np.array(seen).T
            inside = np.mean((pit > 0.1) & (pit < 0.9))
            error = np.sqrt(inside * (1.0 - inside) / pit.size)
            low, high = np.mean(pit <= 0.1), np.mean(pit >= 0.9)
            print(
                f"| {name} | {way} | {inside:.3f} ± {error:.3f} | {low:.3f} | {high:.3f} "
                f"| {actual.mean():.2f} | {median.mean():.2f} | {width.mean():.1f} | {score.mean():.3f} |",
                flush=True,
            )


if __name__ == "__main__":
    main()
