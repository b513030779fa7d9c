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
    family: str = "weibull"  # or lognormal, gamma, log-logistic
    infants: float = 0.0
    infant_mean: float = 0.0  # days, exponential; 0: evenly within five days
    position_spread: float = 0.0  # variance of a factor of the hazard, by position
    sizes: tuple[float, float] | None = None  # positions of old sites, log-evenly, instead of `positions`
    large_site: int = 0  # positions of the first site
    new_positions: int | None = None
    young_share: float = 0.0  # of old positions that began within the past twenty days
    horizon: float = HORIZON
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
    by_week: NDArray[np.int64]  # of all, where the horizon is whole weeks of days
    old_site: str
    deployed: FloatArray  # use since each position got its first part


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
    factor: FloatArray  # of the hazard, by position
    case: Case
    rng: np.random.Generator

    def lives(self, position: NDArray[np.int64]) -> FloatArray:
        size = position.size
        life = self.scale * self._standard(size) * self.factor[position] ** (-1.0 / self.shape)
        if self.case.infants:
            early = self.rng.random(size) < self.case.infants
            mean = self.case.infant_mean
            soon = self.rng.exponential(mean, size) if mean else self.rng.uniform(0.0, 5.0, size)
            life = np.where(early, soon, life)
        return life

    def _standard(self, size: int) -> FloatArray:
        match self.case.family:
            case "lognormal":
                return np.exp(0.6 * self.rng.standard_normal(size))
            case "gamma":
                return self.rng.gamma(3.0, 1.0 / 3.0, size)
            case "log-logistic":
                return (1.0 / self.rng.random(size) - 1.0) ** (-1.0 / 3.0)
        return self.rng.weibull(self.shape, size)


def _one_fleet(case: Case, rng: np.random.Generator) -> Fleet | None:
    count = case.sites + 1
    factor = rng.gamma(1 / case.spread, case.spread, count) if case.spread else np.ones(count)
    shape, scale = _drawn(case.shape, rng), _drawn(case.scale, rng)
    site = np.repeat(np.arange(count), _sizes(case, rng))
    factor = factor[site]
    if case.position_spread:
        factor = factor * rng.gamma(1 / case.position_spread, case.position_spread, site.size)
    truth = _Truth(shape, scale, factor, case, rng)
    is_new = site == case.sites
    start = -rng.uniform(*case.deployed, site.size)
    start[is_new] = -rng.uniform(0.0, 12.0, int(is_new.sum()))
    if case.young_share:
        young = ~is_new & (rng.random(site.size) < case.young_share)
        start[young] = -rng.uniform(0.0, 20.0, int(young.sum()))
    duty = np.exp(rng.uniform(*np.log(case.past_duty), count))[site]
    start = np.floor(start * duty)
    factor_ahead = (
        np.exp(case.duty_spread * rng.standard_normal() - case.duty_spread**2 / 2.0) if case.duty_spread else 1.0
    )
    offset = rng.integers(0, int(case.visits), site.size).astype(float) if case.visits else np.zeros(site.size)
    end = case.horizon * duty
    ledger = _follow(truth, site, start, end * factor_ahead, offset)
    return _written_down(case, site, start, duty, offset, ledger, end)


def _sizes(case: Case, rng: np.random.Generator) -> NDArray[np.int64]:
    sizes = np.full(case.sites + 1, case.positions)
    if case.sizes is not None:
        sizes[:-1] = [round(_drawn(case.sizes, rng)) for _ in range(case.sites)]
    if case.large_site:
        sizes[0] = case.large_site
    if case.new_positions is not None:
        sizes[-1] = case.new_positions
    return sizes


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
        failing = fitted + truth.lives(position)
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
        by_week=_by_week(ledger.ended[future], case.horizon),
        old_site=str(names[0]),
        deployed=-start,
    )


def _by_week(days: FloatArray, horizon: float) -> NDArray[np.int64]:
    """A failure of day 1 to 7 lies in the first week."""
    return np.bincount(((days - 1.0) // 7).astype(np.int64), minlength=int(np.ceil(horizon / 7)))
