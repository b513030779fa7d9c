"""Plain, seeded simulation of the same counts as `counts.forecast_counts`: slow, simple, and written separately.

It serves to check the exact engine, what-ifs that feed back on themselves (retrofits at a given pace), which have no
generating function, and differences: the k-th life of a position has the same luck whatever is assumed.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from reliability.stats.count_designs import roles_of
from reliability.stats.count_luck import DesignLives, Luck
from reliability.stats.errors import InvalidArgument
from reliability.stats.unknown_ages import drawn_ages

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]
BoolArray = NDArray[np.bool_]


@dataclass(frozen=True)
class Retrofit:
    """Running parts of the old design changed for the later one: so many each step from a share of the horizon on.

    start: share of the horizon; each: parts a step; step: share of the horizon; most: parts in all. Who is next is a
    matter of chance.
    """

    start: float
    each: float
    step: float
    most: float = np.inf

    def due(self, steps: int) -> float:
        """Parts due by the end of so many steps."""
        return float(min(np.floor(self.each * steps + 1e-9), self.most))


@dataclass(frozen=True, eq=False)
class SimulatedCounts:
    """One fleet a draw: counts (draws,) in total, by group label (draws,), by window (draws, windows).

    by_position: failed, used and planned of each position, (draws, positions), within the stretch; by_later: those of
    them that the later design followed.
    """

    failures: FloatArray
    parts_used: FloatArray
    planned: FloatArray
    by_group: dict[Any, FloatArray] = field(default_factory=dict)
    by_window: FloatArray = field(default_factory=lambda: np.zeros((0, 0)))
    by_position: tuple[FloatArray, FloatArray, FloatArray] = field(default=(np.zeros((0, 0)),) * 3, repr=False)
    by_later: tuple[FloatArray, FloatArray, FloatArray] = field(default=(np.zeros((0, 0)),) * 3, repr=False)


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
    switch_at: ArrayLike | None = None,
    refit_delay: float = 0.0,
    join_at: ArrayLike = 0.0,
    designs: Sequence[Any] | None = None,
    next_designs: Sequence[Any] | None = None,
    later_designs: Sequence[Any] | None = None,
    stretch: tuple[float, float] = (0.0, 1.0),
    retrofit: Retrofit | None = None,
    taken_share: float = 0.0,
    oldest: ArrayLike = 0.0,
) -> SimulatedCounts:
    """One simulated horizon for each posterior draw; arguments as in `forecast_counts` (no weights). Units of the
    lives.

    stretch: shares of the horizon between which counts count. retrofit: see there; it needs a later design.
    """
    age = np.asarray(ages, dtype=np.float64)
    count = age.size
    later = next_posterior if later_designs is None else later_designs
    roles = roles_of(posterior, designs, next_designs, later, switch_at is not None)
    if roles.has_spread and sites is None:
        raise InvalidArgument("This posterior has a spread between sites: give the site of every position.")
    if retrofit is not None and later is None:
        raise InvalidArgument("Retrofits need the design that goes in.")
    labels = list(sites) if sites is not None else [None] * count

    def column(values: ArrayLike) -> FloatArray:
        return np.broadcast_to(np.asarray(values, dtype=np.float64), (count,))

    # draws of the lives, of the duty and of chance: each stays the same whatever else is asked
    for_lives, for_duty, for_luck, for_order, for_ages = rng.spawn(5)
    fleet = _Fleet(
        lives=DesignLives.drawn(roles, draws, for_lives, labels),
        duty=_duty(duty_spread, draws, labels, for_duty),
        horizon=column(horizons),
        leave_at=column(leave_at),
        join_at=column(join_at),
        replace_at=column(replace_at),
        other_removals=column(other_removals),
        switch_at=column(np.inf if switch_at is None else switch_at),
        visits=None if visits is None else (column(visits[0]), column(visits[1])),
        refit_delay=refit_delay,
        taken_share=taken_share,
        already=np.broadcast_to(False if roles.later is None else roles.running == roles.later, (count,)),
        luck=Luck(for_luck, (draws, count)),
        order=for_order.permutation(count),
    )
    edges = np.array([0.0, 1.0]) if windows is None else np.asarray(windows, dtype=np.float64) / windows[-1]
    tally = _Tally(draws, fleet.horizon, edges, stretch)
    fleet.run(fleet.ages_now(age, column(oldest), for_ages), column(down_until), tally, retrofit)
    by_group = (
        {} if groups is None else {g: tally.failed[:, _where(groups, g)].sum(axis=1) for g in dict.fromkeys(groups)}
    )
    return SimulatedCounts(
        failures=tally.failed.sum(axis=1),
        parts_used=tally.used.sum(axis=1),
        planned=tally.planned.sum(axis=1),
        by_group=by_group,
        by_window=tally.windows,
        by_position=(tally.failed, tally.used, tally.planned),
        by_later=tally.later,
    )


@dataclass(frozen=True, eq=False)
class _Fleet:
    lives: DesignLives
    duty: FloatArray
    horizon: FloatArray
    leave_at: FloatArray
    join_at: FloatArray
    replace_at: FloatArray
    other_removals: FloatArray
    switch_at: FloatArray
    visits: tuple[FloatArray, FloatArray] | None
    refit_delay: float
    taken_share: float
    already: BoolArray  # positions that hold the later design from the start
    luck: Luck
    order: IntArray

    def ages_now(self, age: FloatArray, oldest: FloatArray, rng: np.random.Generator) -> FloatArray:
        """Ages (draws, positions), drawn where they are known only to be at least `age`."""
        ages = np.broadcast_to(age, self.duty.shape).copy()
        unknown = np.flatnonzero(oldest > age)
        luck = rng.random((len(ages), unknown.size))
        if unknown.size:
            # a part that waits for a visit was good at the last one
            waited = np.zeros(1) if self.visits is None else np.maximum(self.visits[0] - self.visits[1], 0.0)[unknown]
            since = np.minimum(waited * self.duty[:, unknown], age[unknown])
            found = drawn_ages(
                lambda at: self.lives.running(at, unknown), age[unknown] - since, oldest[unknown] - since, luck
            )
            ages[:, unknown] = found + since
        return ages

    def run(self, age: FloatArray, down: FloatArray, tally: _Tally, retrofit: Retrofit | None) -> None:
        """Follow every position of every draw from end to end of its parts until the horizon is over."""
        size = self.duty.shape
        last = np.minimum(self.horizon, self.leave_at)
        fresh = np.broadcast_to(down > 0, size)
        now = np.zeros(size) + np.where(down > 0, down, self.join_at)
        current = np.where(fresh, 0.0, age) + np.zeros(size)
        tally.count_used(now, fresh & (down <= last))
        if self.visits is not None:
            every, upcoming = self.visits
            # a running part was good at the last visit, or when it was fitted since
            known_good = np.maximum(upcoming - every, -current / self.duty)
            earlier = ~fresh & (self.join_at == 0)
            now = np.where(earlier, known_good, now)
            current = np.where(earlier, np.maximum(current + known_good * self.duty, 0.0), current)
        design = np.where(fresh, np.where(now > self.switch_at, 2, 1), np.where(self.already, 2, 0))
        state = _State(now, current, design, np.zeros(size, dtype=np.int64))
        self._draw_ends(state, np.ones(size, dtype=bool))
        for until in _steps(retrofit):
            self._until(state, np.minimum(last, until * self.horizon), tally)
            if retrofit is not None and until > retrofit.start and until < 1.0:
                self._retrofit(state, until, retrofit, tally)

    def _until(self, state: _State, limit: FloatArray, tally: _Tally) -> None:
        while (here := state.end <= limit).any():
            now = state.end + self.refit_delay
            flags = (state.failed, state.planned, state.elsewhere)
            tally.count(state.end, here, flags, now > self.switch_at)
            self._renew(state, here, np.where(here, now, 0.0), np.where(now > self.switch_at, 2, 1))

    def _renew(self, state: _State, here: BoolArray, now: FloatArray, design: IntArray) -> None:
        state.now = np.where(here, now, state.now)
        state.age = np.where(here, 0.0, state.age)
        state.design = np.where(here, design, state.design)
        state.life = state.life + here
        self._draw_ends(state, here)

    def _retrofit(self, state: _State, until: float, retrofit: Retrofit, tally: _Tally) -> None:
        """The next old parts in the order of chance, as many as are due by now."""
        at = until * self.horizon
        old = (state.design < 2) & (at < self.leave_at) & (at > np.maximum(self.join_at, state.now))
        behind = np.cumsum(old[:, self.order], axis=1)
        place = np.empty_like(behind)
        place[:, self.order] = behind
        steps = round((until - retrofit.start) / retrofit.step)
        chosen = old & (place <= retrofit.due(steps) - retrofit.due(steps - 1))
        nothing = np.zeros_like(old)
        tally.count(np.broadcast_to(at, old.shape), chosen, (nothing, chosen, nothing), chosen)
        self._renew(state, chosen, np.broadcast_to(at, old.shape), np.full(old.shape, 2))

    def _draw_ends(self, state: _State, where: BoolArray) -> None:
        """Time at which each of these parts goes out, and whether by failure or by plan."""
        draw, position = np.nonzero(where)
        now, age = state.now[draw, position], state.age[draw, position]
        duty = self.duty[draw, position]
        first, second, third = self.luck.of(state.life[draw, position], draw, position)
        final = self.lives.end(state.design[draw, position], age, first, draw, position)
        failing = now + (final - age) / duty
        with np.errstate(divide="ignore"):
            removal = np.maximum(now, 0.0) + second / self.other_removals[position]
        due = now + np.maximum(self.replace_at[position] - age, 0.0) / duty
        end = np.minimum(np.minimum(failing, removal), due)
        failed, planned = failing <= end, (due <= end) & (failing > end)
        if self.visits is not None:
            every, upcoming = (column[position] for column in self.visits)
            safe = np.where(every > 0, every, 1.0)
            soonest = np.ceil((end - upcoming) / safe - 1e-12)
            number = np.maximum(soonest, np.floor((now - upcoming) / safe) + 1.0)
            seen = np.where(every > 0, upcoming + np.maximum(number, 0.0) * every, end)
            failed = np.where(every > 0, failing <= seen, failed)
            planned = np.where(every > 0, ~failed & (removal > seen), planned)
            end = seen
        state.end[draw, position] = end
        state.failed[draw, position], state.planned[draw, position] = failed, planned
        # removals that are counted with what caused them
        state.elsewhere[draw, position] = ~failed & ~planned & (-np.expm1(-third) < self.taken_share)


class _State:
    """Of every draw and position: the part's start, age then, design, number, and how it ends."""

    def __init__(self, now: FloatArray, age: FloatArray, design: IntArray, life: IntArray) -> None:
        self.now, self.age, self.design, self.life = now, age, design, life
        self.end = np.full(now.shape, np.inf)
        self.failed, self.planned, self.elsewhere = (np.zeros(now.shape, dtype=bool) for _ in range(3))


def _steps(retrofit: Retrofit | None) -> list[float]:
    if retrofit is None:
        return [1.0]
    found = np.arange(retrofit.start + retrofit.step, 1.0, retrofit.step).tolist()
    return [*found, 1.0]


class _Tally:
    def __init__(self, draws: int, horizon: FloatArray, edges: FloatArray, stretch: tuple[float, float]) -> None:
        self.failed, self.used, self.planned = (np.zeros((draws, horizon.size)) for _ in range(3))
        self.later = tuple(np.zeros((draws, horizon.size)) for _ in range(3))
        self.windows = np.zeros((draws, edges.size - 1))
        self._horizon, self._edges = horizon, edges
        self._begin, self._end = stretch[0] * horizon, stretch[1] * horizon

    def _inside(self, at: FloatArray, which: BoolArray) -> BoolArray:
        return which & ((at > self._begin) | (self._begin == 0)) & (at <= self._end)

    def count_used(self, at: FloatArray, used: BoolArray) -> None:
        self.used += self._inside(at, used)

    def count(
        self, end: FloatArray, here: BoolArray, flags: tuple[BoolArray, BoolArray, BoolArray], later: BoolArray
    ) -> None:
        """flags: failed, replaced by plan, counted elsewhere; later: the later design goes in."""
        failed, planned, elsewhere = flags
        counted = self._inside(end, here)
        for total, followed, own in zip(
            (self.failed, self.used, self.planned), self.later, (failed, ~elsewhere, planned), strict=True
        ):
            total += counted & own
            followed += counted & own & later
        draw, position = np.nonzero(here & failed)
        share = end[draw, position] / self._horizon[position]
        window = np.clip(np.searchsorted(self._edges, share, side="left") - 1, 0, self._edges.size - 2)
        np.add.at(self.windows, (draw, window), 1.0)


def _duty(spread: float | tuple[float, float], draws: int, labels: list[Any], rng: np.random.Generator) -> FloatArray:
    common, own = spread if isinstance(spread, tuple) else (spread, 0.0)
    distinct = list(dict.fromkeys(labels))
    number = {label: index for index, label in enumerate(distinct)}
    logs = common * rng.standard_normal((draws, 1)) - common**2 / 2.0
    logs = logs + own * rng.standard_normal((draws, len(distinct))) - own**2 / 2.0
    return np.exp(logs)[:, [number[label] for label in labels]]


def _where(groups: Sequence[Any], label: Any) -> BoolArray:
    return np.array([group == label for group in groups])
