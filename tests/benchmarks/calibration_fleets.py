"""Simulated fleets whose truth is known, to see whether forecast bands hold. Separate from the demo's fleet.

Day 0 is the as-of day; histories lie before it, the quarter to be forecast after it. Lives are simulated in
continuous time and written down in whole days, as people would: a failure counts the day it happened, a withdrawal
whole days only.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from reliability.stats.lifetimes import Lifetimes

FloatArray = NDArray[np.float64]
HORIZON = 91.0
NEW_SITE = "new site"


@dataclass(frozen=True)
class Case:
    """One kind of fleet. Ages in days; rates a day."""

    shape: float | tuple[float, float] = 2.0
    scale: float | tuple[float, float] = 100.0
    spread: float = 0.0
    sites: int = 12
    positions: int = 16  # a site
    deployed: tuple[float, float] = (10.0, 120.0)  # days before the as-of day, evenly
    records_from: float | None = None  # days before the as-of day since when removals are written down
    visits: float = 0.0
    other_removals: float = 0.0
    replace_at: float = np.inf
    duty_spread: float = 0.0
    past_duty: tuple[float, float] = (1.0, 1.0)  # duty of sites, log-evenly; lives are then counted in strokes
    lognormal: bool = False
    infants: float = 0.0
    keep: Callable[[float], bool] = field(default=lambda failures: True)


@dataclass(frozen=True, eq=False)
class Fleet:
    """What the office knows on day 0, and what then happened."""

    records: Lifetimes
    ages: FloatArray
    horizons: FloatArray
    sites: NDArray[np.str_]
    visits: tuple[float, FloatArray] | None
    removals: float  # other removals in the records
    observed_time: float
    outcomes: dict[str, int]  # failures found in the horizon: "all", one old site, the new site
    old_site: str


def make_fleet(case: Case, rng: np.random.Generator) -> Fleet:
    """A fleet of this kind that passes its filter, with its future."""
    while True:
        fleet = _one_fleet(case, rng)
        if fleet is not None and case.keep(fleet.records.failures):
            return fleet


def _drawn(value: float | tuple[float, float], rng: np.random.Generator) -> float:
    """The number, or one drawn log-evenly from the range."""
    return float(np.exp(rng.uniform(*np.log(value)))) if isinstance(value, tuple) else value


@dataclass(eq=False)
class _Truth:
    shape: float
    scale: float
    factor: FloatArray  # of the hazard, by site
    case: Case
    rng: np.random.Generator

    def lives(self, site: NDArray[np.int64]) -> FloatArray:
        size = site.size
        if self.case.lognormal:
            life = self.scale * np.exp(0.6 * self.rng.standard_normal(size))
        else:
            life = self.scale * self.rng.weibull(self.shape, size)
        life = life * self.factor[site] ** (-1.0 / self.shape)
        if self.case.infants:
            early = self.rng.random(size) < self.case.infants
            life = np.where(early, self.rng.uniform(0.0, 5.0, size), life)
        return life


def _one_fleet(case: Case, rng: np.random.Generator) -> Fleet | None:
    count = case.sites + 1
    factor = rng.gamma(1 / case.spread, case.spread, count) if case.spread else np.ones(count)
    truth = _Truth(_drawn(case.shape, rng), _drawn(case.scale, rng), factor, case, rng)
    site = np.repeat(np.arange(count), case.positions)
    is_new = site == case.sites
    start = -rng.uniform(*case.deployed, site.size)
    start[is_new] = -rng.uniform(0.0, 12.0, int(is_new.sum()))
    duty = np.exp(rng.uniform(*np.log(case.past_duty), count))[site]
    start = np.floor(start * duty)
    factor_ahead = (
        np.exp(case.duty_spread * rng.standard_normal() - case.duty_spread**2 / 2.0) if case.duty_spread else 1.0
    )
    offset = rng.integers(0, int(case.visits), site.size).astype(float) if case.visits else np.zeros(site.size)
    end = HORIZON * duty
    ledger = _follow(truth, site, start, end * factor_ahead, offset)
    return _written_down(case, site, start, duty, offset, ledger, end)


@dataclass(eq=False)
class _Ledger:
    """All fittings: position, day fitted, day ended, last day known good, and why it ended (0 runs, 1 failed, 2
    other).
    """

    position: NDArray[np.int64]
    fitted: FloatArray
    ended: FloatArray
    last_good: FloatArray
    why: NDArray[np.int64]


def _follow(truth: _Truth, site: NDArray[np.int64], start: FloatArray, end: FloatArray, offset: FloatArray) -> _Ledger:
    case, rng = truth.case, truth.rng
    rows: list[tuple[NDArray[np.int64], FloatArray, FloatArray, FloatArray, NDArray[np.int64]]] = []
    position, fitted = np.arange(site.size), start.copy()
    while position.size:
        failing = fitted + truth.lives(site[position])
        other = fitted + (rng.exponential(1 / case.other_removals, position.size) if case.other_removals else np.inf)
        due = fitted + case.replace_at
        ended = np.minimum(np.minimum(failing, other), due)
        good = np.full(position.size, np.nan)
        if case.visits:
            shift = offset[position]
            number = np.ceil((ended - shift) / case.visits)
            number = np.maximum(number, np.floor((fitted - shift) / case.visits) + 1.0)
            ended = shift + number * case.visits
            good = np.maximum(ended - case.visits, fitted)
            why = np.where(failing <= ended, 1, 2)
        else:
            why = np.where(failing <= ended, 1, 2)
            ended = np.where(why == 1, np.ceil(ended), np.maximum(np.floor(ended), fitted))
        over = ended > end[position]
        rows.append((position, fitted, np.where(over, np.inf, ended), good, np.where(over, 0, why)))
        position, fitted = position[~over], ended[~over]
    return _Ledger(*(np.concatenate(column) for column in zip(*rows, strict=True)))


def _written_down(
    case: Case,
    site: NDArray[np.int64],
    start: FloatArray,
    duty: FloatArray,
    offset: FloatArray,
    ledger: _Ledger,
    end: FloatArray,
) -> Fleet | None:
    names = np.array([f"S{number:02d}" for number in range(case.sites)] + [NEW_SITE])
    where = site[ledger.position]
    future = (ledger.ended > 0) & (ledger.why == 1)
    past_end = np.minimum(ledger.ended, 0.0)
    if case.visits:
        last_visit = offset[ledger.position] - case.visits * np.ceil(offset[ledger.position] / case.visits)
        last_visit = np.where(last_visit > 0, last_visit - case.visits, last_visit)
        past_end = np.where(ledger.ended > 0, np.minimum(past_end, last_visit), past_end)
    known = ledger.fitted < 0
    entry = np.zeros(ledger.fitted.size)
    if case.records_from is not None:
        known &= past_end > -case.records_from
        entry = np.maximum(-case.records_from * duty[ledger.position] - ledger.fitted, 0.0)
    age = past_end - ledger.fitted
    failed = (ledger.ended <= 0) & (ledger.why == 1)
    used = known & (age > entry)
    if not used.any():
        return None
    good = np.maximum(ledger.last_good - ledger.fitted, entry)
    records = Lifetimes(
        age[used],
        failed[used],
        entries=entry[used],
        last_good=np.where(failed & ~np.isnan(ledger.last_good), good, np.nan)[used],
        sites=names[where][used],
    ).grouped()
    running = (ledger.fitted <= 0) & (ledger.ended > 0)
    order = np.argsort(ledger.position[running])
    upcoming = np.where(offset > 0, offset, case.visits)
    return Fleet(
        records=records,
        ages=-ledger.fitted[running][order],
        horizons=end,
        sites=names[site],
        visits=(case.visits, upcoming) if case.visits else None,
        removals=float((used & (ledger.ended <= 0) & (ledger.why == 2)).sum()),
        observed_time=records.exposure,
        outcomes={
            "all": int(future.sum()),
            "old site": int(future[where == 0].sum()),
            NEW_SITE: int(future[where == case.sites].sum()),
        },
        old_site=str(names[0]),
    )
