"""Simulated rollouts with known truth: false verdicts over 26 weekly looks, and coverage of the life ratio.

Run with a number of rollouts (`bench_rollouts.py 400`); 100 otherwise. Positions fail day by day, are renewed at once,
and new parts go in as the rollout says. False verdicts: the new part is as good as the old. Coverage: it lives 1.3
times as long, shape 2 before and 2.5 after, sites differing, few failures.
"""

from __future__ import annotations

import math
import sys
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from reliability.stats.errors import StatisticsError
from reliability.stats.life_ratio import life_ratio
from reliability.stats.life_ratio_posterior import life_ratio_posterior
from reliability.stats.life_ratio_split import split_at_start
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.sequential import Look, planned_information, take_look, verdict

WEEKS, HISTORY, SCALE, SHAPE = 26, 240, 100.0, 2.0


@dataclass(frozen=True)
class Rollout:
    """pace: share of the positions upgraded by day; None: at failure. spread, position_spread: variances of the
    multipliers; falling: how far the hazard falls from the first day to the last."""

    name: str
    how: str = "planned"
    sites: int = 12
    each: int = 24
    spread: float = 0.3
    position_spread: float = 0.0
    falling: float = 0.0
    factor: float = 1.0
    new_shape: float = SHAPE


@dataclass(frozen=True)
class Ledger:
    """One row a life: position, site, fitted and ended (days, 0 the rollout's start), failed, new."""

    position: np.ndarray
    site: np.ndarray
    fitted: np.ndarray
    ended: np.ndarray
    failed: np.ndarray
    new: np.ndarray


def multipliers(rng: np.random.Generator, spread: float, count: int) -> np.ndarray:
    return rng.gamma(1.0 / spread, spread, count) if spread else np.ones(count)


def lived(rng: np.random.Generator, rollout: Rollout) -> Ledger:
    count = rollout.sites * rollout.each
    site = np.repeat(np.arange(rollout.sites), rollout.each)
    z = multipliers(rng, rollout.spread, rollout.sites)[site] * multipliers(rng, rollout.position_spread, count)
    upgrade = np.full(count, np.inf)
    if rollout.how == "planned":  # in random order, through the weeks
        upgrade = rng.permutation(count) * (0.75 * 7 * WEEKS / count)
    elif rollout.how == "half":
        order = np.argsort(rng.random((rollout.sites, rollout.each)), axis=1).ravel()
        upgrade = np.where(order < rollout.each // 2, 0.0, np.inf)
    age, new = np.zeros(count), np.zeros(count, dtype=bool)
    fitted = np.full(count, -float(HISTORY))
    rows: list[tuple[np.ndarray, ...]] = []
    index = np.arange(count)

    def close(which: np.ndarray, day: int, failed: bool) -> None:
        rows.append(
            (index[which], fitted[which], np.full(which.sum(), float(day)), np.full(which.sum(), failed), new[which])
        )

    new_scale = SCALE * rollout.factor
    for day in range(-HISTORY, 7 * WEEKS):
        due = ~new & (upgrade <= day)
        if due.any():
            kept = due & (age > 0)
            close(kept, day, False)
            new, age, fitted = new | due, np.where(due, 0.0, age), np.where(due, float(day), fitted)
        shape, scale = np.where(new, rollout.new_shape, SHAPE), np.where(new, new_scale, SCALE)
        hazard = ((age + 1.0) / scale) ** shape - (age / scale) ** shape
        change = 1.0 - rollout.falling * max(0.0, day / (7.0 * WEEKS))
        fails = rng.random(count) < -np.expm1(-hazard * z * change)
        age = age + 1.0
        if fails.any():
            close(fails, day + 1, True)
            if rollout.how == "at failure" and day >= 0:
                new = new | fails
            age, fitted = np.where(fails, 0.0, age), np.where(fails, float(day + 1), fitted)
    running = age > 0
    close(running, 7 * WEEKS, False)
    position, fitted, ended, failed, new = (np.concatenate(column) for column in zip(*rows, strict=True))
    return Ledger(position, site[position], fitted, ended, failed, new)


def known(ledger: Ledger, day: float) -> tuple[Lifetimes, np.ndarray, np.ndarray]:
    """Lives as known on the day, True for the new ones, and their rows in the ledger."""
    end = np.minimum(ledger.ended, day)
    rows = np.flatnonzero(end > ledger.fitted)
    failed = ledger.failed[rows] & (ledger.ended[rows] <= day)
    return Lifetimes(end[rows] - ledger.fitted[rows], failed, sites=ledger.site[rows]), ledger.new[rows], rows


def looks(ledger: Ledger, *, concurrent: bool = True) -> list[Look]:
    """Every week's look; concurrent: old parts count by site from the rollout's first day only."""
    found = []
    for week in range(1, WEEKS + 1):
        lives, new, rows = known(ledger, 7.0 * week)
        begin = np.maximum(-ledger.fitted[rows], 0.0) * (~new) if concurrent else 0
        positions = ledger.position[rows]
        found.append(take_look(lives, new, sites=lives.sites, positions=positions, concurrent_from=begin, label=week))
    return found


def false_verdicts(rollout: Rollout, count: int, planned: float) -> None:
    said = {"clear": 0, "shorter": 0}
    without_positions = uncontrolled = unbounded = 0
    path: list[Look] = []
    for number in range(count):
        ledger = lived(np.random.default_rng([7, number]), rollout)
        path = looks(ledger, concurrent=True)
        phrase = verdict(path, planned).phrase
        said[phrase] = said.get(phrase, 0) + 1
        plain = [replace(look, position_score=None, position_information=None) for look in path]
        without_positions += verdict(plain, planned).phrase == "clear"
        unbounded += any(look.z >= 1.96 for look in path)
        if rollout.falling:
            past = [Look(look.score, look.information) for look in looks(ledger, concurrent=False)]
            uncontrolled += verdict(past, planned).phrase == "clear"
    reached = f"V {path[-1].information:5.1f} of {planned:.1f}"
    extra = f", with the past as control, by site alone {100 * uncontrolled / count:5.1f}" if rollout.falling else ""
    print(
        f"{rollout.name:44s} clear {100 * said['clear'] / count:5.1f}  shorter {100 * said['shorter'] / count:5.1f}  "
        f"(site strata alone: clear {100 * without_positions / count:5.1f}; single looks at 1.96: "
        f"{100 * unbounded / count:5.1f}{extra})  {reached}",
        flush=True,
    )


def true_verdicts(rollout: Rollout, count: int, planned: float) -> None:
    """How often a part that lives as long as hoped for has been called clear within the weeks."""
    weeks = []
    for number in range(count):
        found = verdict(looks(lived(np.random.default_rng([9, number]), rollout)), planned)
        weeks += [found.decided_at] if found.phrase == "clear" else []
    half = f"half of these by week {np.median(weeks):.0f}" if weeks else ""
    print(f"{rollout.name:44s} clear {100 * len(weeks) / count:5.1f}  {half}", flush=True)


def coverage(rollout: Rollout, count: int) -> None:
    truth = {
        share: rollout.factor * (-math.log1p(-share)) ** (1.0 / rollout.new_shape - 1.0 / SHAPE) for share in (0.1, 0.5)
    }
    held, independent, failures, refused, unbounded = np.zeros(2), np.zeros(2), 0.0, 0, 0
    for number in range(count):
        ledger = lived(np.random.default_rng([8, number]), rollout)
        lives, new, rows = known(ledger, 7.0 * WEEKS)
        before, after = lives.subset(~new), lives.subset(new)
        positions = (ledger.position[rows][~new], ledger.position[rows][new]) if rollout.position_spread else None
        try:
            together = life_ratio(before, after, positions=positions)
            apart = life_ratio(unsited(before), unsited(after))
        except StatisticsError:
            refused += 1
            continue
        failures += after.failures
        for found, tally in ((together, held), (apart, independent)):
            tally += [found.ratio(share).lower <= value <= found.ratio(share).upper for share, value in truth.items()]
        unbounded += any(ratio.upper_unbounded or ratio.lower_unbounded for ratio in together.ratios)
    used = count - refused
    print(
        f"{rollout.name:44s} B10 {100 * held[0] / used:5.1f}  median {100 * held[1] / used:5.1f}   independent lives: "
        f"B10 {100 * independent[0] / used:5.1f}  median {100 * independent[1] / used:5.1f}   new failures "
        f"{failures / used:5.1f}, refused {refused}, unbounded {unbounded}",
        flush=True,
    )


def over_the_same_dates(rollout: Rollout, count: int) -> None:
    """Equal parts compared from the first day on: sites alone, and positions with their past."""
    names = ("sites", "positions with their past")
    held, likely, wide = np.zeros(2), np.zeros(2), np.zeros(2)
    for number in range(count):
        ledger = lived(np.random.default_rng([10, number]), rollout)
        lives, new, rows = known(ledger, 7.0 * WEEKS)
        cut = split_at_start(lives, np.maximum(-ledger.fitted[rows], 0.0) * ~new)
        is_new, places = new[cut.now_rows], ledger.position[rows]
        before, after = cut.now.subset(~is_new), cut.now.subset(is_new)
        now = places[cut.now_rows]
        past = {"past": cut.past, "positions": (now[~is_new], now[is_new], places[cut.past_rows])}
        for row, options in enumerate(({}, past)):
            ratio = life_ratio(before, after, probabilities=[0.5], **options).median
            held[row] += ratio.lower <= 1.0 <= ratio.upper
            wide[row] += math.log(ratio.upper / ratio.lower)
            likely[row] += life_ratio_posterior(before, after, draws=600, **options).probability() > 0.9
    told = "   ".join(
        f"{name}: held {100 * held[row] / count:5.1f}, likely {100 * likely[row] / count:5.1f}, "
        f"width {wide[row] / count:.2f}"
        for row, name in enumerate(names)
    )
    print(f"{rollout.name:44s} {told}", flush=True)


def unsited(lives: Lifetimes) -> Lifetimes:
    return Lifetimes(lives.durations, lives.observed, entries=lives.entries)


NULLS = (
    Rollout("planned rollout"),
    Rollout("upgrade at failure", how="at failure"),
    Rollout("half of each site", how="half"),
    Rollout("positions that differ, planned", position_spread=0.5),
    Rollout("positions that differ, upgrade at failure", how="at failure", position_spread=0.5),
    Rollout("calendar hazard falling 17 %, planned", falling=0.17),
    Rollout("calendar hazard falling 17 %, at failure", how="at failure", falling=0.17),
)
BETTER = Rollout("", factor=1.3, new_shape=2.5)
COVERED = (
    replace(BETTER, name="planned, nu 0.3", each=6),
    replace(BETTER, name="planned, nu 1", each=6, spread=1.0),
    replace(BETTER, name="at failure, nu 0.3", each=6, how="at failure"),
    replace(BETTER, name="at failure, nu 1", each=6, how="at failure", spread=1.0),
    replace(BETTER, name="half of each site, nu 1, few failures", each=3, how="half", spread=1.0),
    replace(BETTER, name="at failure, positions differ 0.5", each=6, how="at failure", position_spread=0.5),
)


def main() -> None:
    count = int(sys.argv[1]) if len(sys.argv) > 1 else 100
    planned = planned_information(1.3, SHAPE)
    print(f"{count} rollouts each, 26 weekly looks; per cent of rollouts without any difference")
    for rollout in NULLS:
        false_verdicts(rollout, count, planned)
    print(f"\n{count} rollouts each, the new part lives 1.3 times as long, as hoped")
    for rollout in (*NULLS[:4:3], NULLS[1], NULLS[2]):
        true_verdicts(replace(rollout, factor=1.3), count, planned)
    print(
        f"\n{count} rollouts each over the same dates, equal parts: median ratio held, posterior above 0.9 (10 is fair)"
    )
    for rollout in NULLS:
        over_the_same_dates(replace(rollout, each=10), count)
    print(f"\n{count} rollouts each; per cent of 95 % intervals of the life ratio that hold the truth")
    for rollout in COVERED:
        coverage(rollout, count)


if __name__ == "__main__":
    main()
