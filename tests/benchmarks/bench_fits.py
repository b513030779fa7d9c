"""Speed and memory of the single-sample estimators, as ratios to lifelines in the same run where it has them."""

from __future__ import annotations

import sys
import time
import tracemalloc
from collections.abc import Callable
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from reliability.stats.kaplan_meier import kaplan_meier
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.other_fits import fit_lognormal
from reliability.stats.posterior import weibull_posterior
from reliability.stats.turnbull import turnbull
from reliability.stats.weibull_fit import fit_weibull

QUANTITIES = ("shape", "scale", "mean", ("quantile", 0.1), ("quantile", 0.5), ("survival", 60.0))


def seconds(action: Callable[[], object], times: int) -> float:
    best = float("inf")
    for _ in range(times):
        begin = time.perf_counter()
        action()
        best = min(best, time.perf_counter() - begin)
    return best


def columns(rng: np.random.Generator, count: int) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Ages, failed, entries: about half failed, a third entered late, every row its own age."""
    entries = np.where(rng.random(count) < 0.3, rng.uniform(0.0, 60.0, count), 0.0)
    ages = 100.0 * ((entries / 100.0) ** 2 + rng.exponential(size=count)) ** 0.5
    ends = entries + rng.uniform(10.0, 200.0, count)
    return np.minimum(ages, ends), ages <= ends, entries


def separate_rows(rng: np.random.Generator, count: int) -> None:
    from lifelines import KaplanMeierFitter, WeibullFitter

    durations, observed, entries = columns(rng, count)
    lives = Lifetimes(durations, observed, entries=entries)
    from_new = Lifetimes(durations, observed)
    rows = [
        (
            "Weibull fit, late entry",
            lambda: fit_weibull(lives),
            lambda: WeibullFitter().fit(durations, observed, entry=entries),
        ),
        (
            "Kaplan–Meier, late entry",
            lambda: kaplan_meier(lives),
            lambda: KaplanMeierFitter().fit(durations, observed, entry=entries),
        ),
        (
            "Kaplan–Meier, from new",
            lambda: kaplan_meier(from_new),
            lambda: KaplanMeierFitter().fit(durations, observed),
        ),
    ]
    for name, ours, theirs in rows:
        own, other = seconds(ours, 3), seconds(theirs, 1)
        print(f"{name:28s} {count:9,d} rows  {own:8.3f} s  lifelines {other:8.3f} s  ratio {other / own:6.1f}")


def growth(rng: np.random.Generator) -> None:
    print("\nTen times the rows (validation and fit)")
    previous = None
    for count in (10_000, 100_000, 1_000_000):
        durations, observed, entries = columns(rng, count)
        taken = seconds(lambda d=durations, o=observed, e=entries: fit_weibull(Lifetimes(d, o, entries=e)), 2)
        print(f"  {count:9,d} rows {taken:8.3f} s  {'' if previous is None else f'{taken / previous:5.1f} times'}")
        previous = taken


def memory(rng: np.random.Generator, count: int = 1_000_000) -> None:
    durations, observed, entries = columns(rng, count)
    tracemalloc.start()
    lives = Lifetimes(durations, observed, entries=entries)
    held = tracemalloc.get_traced_memory()[0] / count
    print(f"\nMemory: the life data hold {held:.0f} bytes a row;", end=" ")
    for name, action in (("Weibull", fit_weibull), ("Kaplan–Meier", kaplan_meier)):
        tracemalloc.reset_peak()
        action(lives)
        print(f"peak with {name} {tracemalloc.get_traced_memory()[1] / count:.0f};", end=" ")
    tracemalloc.stop()
    print()


def grouped_rows(rng: np.random.Generator) -> None:
    durations, observed, entries = columns(rng, 100_000)
    whole = Lifetimes(np.ceil(durations), observed, entries=np.floor(entries / 7.0) * 7.0)
    lives = whole.grouped()
    looks = np.where(observed, np.maximum(np.floor(durations / 10.0) * 10.0, entries), np.nan)
    between = Lifetimes(
        np.where(observed, np.floor(durations / 10.0) * 10.0 + 10.0, np.ceil(durations)), observed, last_good=looks
    ).grouped()
    print(f"\nDay ages: {len(lives):,d} distinct rows, {lives.count:,.0f} lives; between looks: {len(between):,d} rows")
    fit, second = fit_weibull(lives), fit_weibull(between.subset(np.arange(min(len(between), 5000))))
    few = between.subset(np.arange(min(len(between), 5000)))
    table = [
        ("group 100,000 lives", lambda: whole.grouped()),
        ("Weibull fit", lambda: fit_weibull(lives)),
        (f"{len(QUANTITIES)} likelihood-ratio intervals", lambda: [fit.interval(quantity) for quantity in QUANTITIES]),
        ("posterior grid", lambda: weibull_posterior(lives, early_until=0.0)),
        ("lognormal fit", lambda: fit_lognormal(lives)),
        ("Kaplan–Meier", lambda: kaplan_meier(lives)),
        ("Weibull fit between looks", lambda: fit_weibull(few)),
        ("its intervals", lambda: [second.interval(quantity) for quantity in QUANTITIES]),
        ("Turnbull between looks", lambda: turnbull(few)),
    ]
    for name, action in table:
        print(f"  {name:32s} {1000 * seconds(action, 5):8.2f} ms")
    spread_rows(rng)


def spread_rows(rng: np.random.Generator) -> None:
    for sites in (16, 200):
        durations, observed, _ = columns(rng, 4000)
        lives = Lifetimes(np.ceil(durations), observed, sites=np.arange(4000) % sites).grouped()
        fit = fit_weibull(lives, site_spread=True)
        print(
            f"  {sites} sites, {len(lives)} rows: site-spread fit "
            f"{1000 * seconds(lambda lives=lives: fit_weibull(lives, site_spread=True), 3):.1f} ms, "
            f"median's interval {1000 * seconds(lambda fit=fit: fit.interval('median'), 3):.1f} ms"
        )


def main() -> None:
    rng = np.random.default_rng(1)
    separate_rows(rng, 1_000_000)
    growth(rng)
    memory(rng)
    grouped_rows(rng)


if __name__ == "__main__":
    main()
