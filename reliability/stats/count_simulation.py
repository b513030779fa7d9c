"""Plain, seeded simulation of the same counts as `counts.forecast_counts`: slow, simple, and written separately.

It serves to check the exact engine, and what-ifs that feed back on themselves, which have no generating function.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import log_ndtr, ndtri_exp

from reliability.stats.errors import InvalidArgument
from reliability.stats.posterior import PosteriorDraws

FloatArray = NDArray[np.float64]
BoolArray = NDArray[np.bool_]


@dataclass(frozen=True, eq=False)
class SimulatedCounts:
    """One fleet a draw: counts (draws,) in total, by group label (draws,), by window (draws, windows)."""

    failures: FloatArray
    parts_used: FloatArray
    planned: FloatArray
    by_group: dict[Any, FloatArray] = field(default_factory=dict)
    by_window: FloatArray = field(default_factory=lambda: np.zeros((0, 0)))


@dataclass(frozen=True, eq=False)
class _Lives:
    """Inverse of the cumulative hazard for each draw and position, arrays (draws, positions) or (draws, 1)."""

    shape: FloatArray
    rate: FloatArray
    early: FloatArray
    early_until: float
    scale: FloatArray
    deviation: FloatArray

    def end(self, age: FloatArray, exponential: FloatArray) -> FloatArray:
        """Age at failure of parts aged `age`, given standard exponential variates."""
        until = self.early_until
        if not until:
            return self._age_at(self._unit(age) + exponential / self.rate)
        first = -np.log1p(-self.early * np.minimum(age, until) / until)
        late = self._unit(np.maximum(age, until)) - self._unit(np.asarray(until))
        target = first + self.rate * late + exponential
        whole = -np.log1p(-self.early)
        beyond = self._age_at(np.maximum(target - whole, 0.0) / self.rate + self._unit(np.asarray(until)))
        with np.errstate(divide="ignore", invalid="ignore"):
            within = until * -np.expm1(-target) / self.early
        return np.where(target < whole, within, beyond)

    def _unit(self, age: FloatArray) -> FloatArray:
        """Cumulative hazard at rate 1."""
        weibull = age**self.shape
        if not self.deviation.any():
            return weibull
        with np.errstate(divide="ignore"):
            place = np.log(age / self.scale) / np.where(self.deviation > 0, self.deviation, 1.0)
        return np.where(self.deviation > 0, -log_ndtr(-place), weibull)

    def _age_at(self, hazard: FloatArray) -> FloatArray:
        """Age at which the cumulative hazard at rate 1 is this much."""
        weibull = hazard ** (1.0 / self.shape)
        if not self.deviation.any():
            return weibull
        return np.where(self.deviation > 0, self.scale * np.exp(-self.deviation * ndtri_exp(-hazard)), weibull)


def simulate_counts(
    posterior: Any,
    ages: ArrayLike,
    horizons: ArrayLike,
    *,
    sites: Sequence[Any] | None = None,
    groups: Sequence[Any] | None = None,
    windows: Sequence[float] | None = None,
    draws: int = 1000,
    rng: np.random.Generator,
    replace_at: ArrayLike = np.inf,
    visits: tuple[ArrayLike, ArrayLike] | None = None,
    other_removals: ArrayLike = 0.0,
    duty_spread: float | tuple[float, float] = 0.0,
    down_until: ArrayLike = 0.0,
    leave_at: ArrayLike = np.inf,
    next_posterior: Any = None,
    switch_at: ArrayLike = np.inf,
    refit_delay: float = 0.0,
) -> SimulatedCounts:
    """One simulated horizon for each posterior draw; arguments as in `forecast_counts` (no weights). Units of the
    lives.
    """
    age = np.asarray(ages, dtype=np.float64)
    count = age.size
    if posterior.has_spread and sites is None:
        raise InvalidArgument("This posterior has a spread between sites: give the site of every position.")
    labels = list(sites) if sites is not None else [None] * count
    fleet = _Fleet(
        lives=_lives(posterior, posterior.draws(draws, rng), labels),
        next_lives=None if next_posterior is None else _lives(next_posterior, next_posterior.draws(draws, rng), labels),
        duty=_duty(duty_spread, draws, labels, rng),
        horizon=np.broadcast_to(np.asarray(horizons, dtype=np.float64), (count,)),
        leave_at=np.broadcast_to(np.asarray(leave_at, dtype=np.float64), (count,)),
        replace_at=np.broadcast_to(np.asarray(replace_at, dtype=np.float64), (count,)),
        other_removals=np.broadcast_to(np.asarray(other_removals, dtype=np.float64), (count,)),
        switch_at=np.broadcast_to(np.asarray(switch_at, dtype=np.float64), (count,)),
        visits=None if visits is None else tuple(np.broadcast_to(np.asarray(v, dtype=float), (count,)) for v in visits),
        refit_delay=refit_delay,
        rng=rng,
    )
    edges = np.array([0.0, 1.0]) if windows is None else np.asarray(windows, dtype=np.float64) / windows[-1]
    tally = _Tally(draws, count, fleet.horizon, edges)
    fleet.run(age, np.broadcast_to(np.asarray(down_until, dtype=np.float64), (count,)), tally)
    by_group = (
        {} if groups is None else {g: tally.failed[:, _where(groups, g)].sum(axis=1) for g in dict.fromkeys(groups)}
    )
    return SimulatedCounts(
        failures=tally.failed.sum(axis=1),
        parts_used=tally.used.sum(axis=1),
        planned=tally.planned.sum(axis=1),
        by_group=by_group,
        by_window=tally.windows,
    )


@dataclass(frozen=True, eq=False)
class _Fleet:
    lives: _Lives
    next_lives: _Lives | None
    duty: FloatArray
    horizon: FloatArray
    leave_at: FloatArray
    replace_at: FloatArray
    other_removals: FloatArray
    switch_at: FloatArray
    visits: tuple[FloatArray, FloatArray] | None
    refit_delay: float
    rng: np.random.Generator

    def run(self, age: FloatArray, down: FloatArray, tally: _Tally) -> None:
        """Follow every position of every draw from end to end of its parts until the horizon is over."""
        size = self.duty.shape
        last = np.minimum(self.horizon, self.leave_at)
        now = np.zeros(size) + down
        current = np.where(down > 0, 0.0, age) + np.zeros(size)
        tally.count_used(np.broadcast_to((down > 0) & (down <= last), size))
        if self.visits is not None:
            every, upcoming = self.visits
            # a running part was good at the last visit, or when it was fitted since
            known_good = np.maximum(upcoming - every, -current / self.duty)
            now = np.where(down > 0, now, known_good)
            current = np.where(down > 0, 0.0, current + known_good * self.duty)
        fitted = np.where(down > 0, now, -np.inf)
        while True:
            end, failed, planned = self._next_end(now, current, fitted)
            here = end <= last
            if not here.any():
                return
            tally.count(end, here, failed, planned)
            now = np.where(here, end + self.refit_delay, np.inf)
            fitted, current = now, np.zeros(size)

    def _next_end(
        self, now: FloatArray, age: FloatArray, fitted: FloatArray
    ) -> tuple[FloatArray, BoolArray, BoolArray]:
        """Time at which each running part goes out, and whether by failure or by plan."""
        exponential = self.rng.exponential(size=now.shape)
        final = self.lives.end(age, exponential)
        if self.next_lives is not None:
            final = np.where(fitted > self.switch_at, self.next_lives.end(age, exponential), final)
        failing = now + (final - age) / self.duty
        with np.errstate(divide="ignore"):
            removal = np.maximum(now, 0.0) + self.rng.exponential(size=now.shape) / self.other_removals
        due = now + np.maximum(self.replace_at - age, 0.0) / self.duty
        if self.visits is None:
            end = np.minimum(np.minimum(failing, removal), due)
            return end, failing <= end, (due <= end) & (failing > end)
        every, upcoming = self.visits
        soonest = np.minimum(np.minimum(failing, removal), due)
        with np.errstate(invalid="ignore"):
            number = np.maximum(np.ceil((soonest - upcoming) / every - 1e-12), np.floor((now - upcoming) / every) + 1.0)
        end = np.where(np.isfinite(now), upcoming + np.maximum(number, 0.0) * every, np.inf)
        failed = failing <= end
        return end, failed, ~failed & (removal > end)


class _Tally:
    def __init__(self, draws: int, count: int, horizon: FloatArray, edges: FloatArray) -> None:
        self.failed, self.used, self.planned = (np.zeros((draws, count)) for _ in range(3))
        self.windows = np.zeros((draws, edges.size - 1))
        self._horizon, self._edges = horizon, edges

    def count_used(self, used: BoolArray) -> None:
        self.used += used

    def count(self, end: FloatArray, here: BoolArray, failed: BoolArray, planned: BoolArray) -> None:
        self.used += here
        self.failed += here & failed
        self.planned += here & planned
        draw, position = np.nonzero(here & failed)
        share = end[draw, position] / self._horizon[position]
        window = np.clip(np.searchsorted(self._edges, share, side="left") - 1, 0, self._edges.size - 2)
        np.add.at(self.windows, (draw, window), 1.0)


def _lives(posterior: Any, drawn: PosteriorDraws, labels: list[Any]) -> _Lives:
    level = drawn.levels[:, None]
    if posterior.has_spread:
        distinct = list(dict.fromkeys(labels))
        number = {label: index for index, label in enumerate(distinct)}
        level = level * drawn.for_sites(distinct)[:, [number[label] for label in labels]]
    deviation = np.zeros(len(drawn)) if drawn.deviations is None else drawn.deviations
    return _Lives(
        drawn.shapes[:, None],
        level,
        drawn.early_shares[:, None],
        drawn.early_until,
        drawn.scales[:, None],
        deviation[:, None],
    )


def _duty(spread: float | tuple[float, float], draws: int, labels: list[Any], rng: np.random.Generator) -> FloatArray:
    common, own = spread if isinstance(spread, tuple) else (spread, 0.0)
    distinct = list(dict.fromkeys(labels))
    number = {label: index for index, label in enumerate(distinct)}
    logs = common * rng.standard_normal((draws, 1)) - common**2 / 2.0
    logs = logs + own * rng.standard_normal((draws, len(distinct))) - own**2 / 2.0
    return np.exp(logs)[:, [number[label] for label in labels]]


def _where(groups: Sequence[Any], label: Any) -> BoolArray:
    return np.array([group == label for group in groups])
