"""Lives and luck of simulated fleets: when a part of a design ends, given what chance has in store for it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.special import log_ndtr, ndtri_exp

from reliability.stats.count_designs import DesignDraws, Roles

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]


class Luck:
    """Three standard exponential variates for the k-th life of every draw and position, the same whenever asked."""

    def __init__(self, rng: np.random.Generator, size: tuple[int, int]) -> None:
        self._rng, self._size = rng, size
        self._tables: list[FloatArray] = []

    def of(self, life: IntArray, draw: IntArray, position: IntArray) -> FloatArray:
        """For life number `life` of each of these (n,): for the failure, a removal, and who counts it, (3, n)."""
        while len(self._tables) <= life.max(initial=0):
            self._tables.append(self._rng.exponential(size=(3, *self._size)))
        found = np.empty((3, *life.shape))
        for number in np.unique(life).tolist():
            same = np.flatnonzero(life == number)
            found[:, same] = self._tables[number][:, draw[same], position[same]]
        return found


@dataclass(frozen=True, eq=False)
class DesignLives:
    """Inverse of the cumulative hazard for each draw and position, by the role its design plays there."""

    roles: list[_Lives]

    @classmethod
    def drawn(cls, roles: Roles, draws: int, rng: np.random.Generator, labels: Sequence[Any]) -> DesignLives:
        distinct = list(dict.fromkeys(labels))
        number = {label: index for index, label in enumerate(distinct)}
        site = np.array([number[label] for label in labels], dtype=np.int64)
        found = DesignDraws.drawn(roles.posteriors, draws, rng, distinct)
        later = roles.fitted if roles.later is None else roles.later
        return cls(
            [_lives(found, np.broadcast_to(code, site.shape), site) for code in (roles.running, roles.fitted, later)]
        )

    def running(self, ages: FloatArray, positions: IntArray) -> FloatArray:
        """Cumulative hazard of the running parts of these positions at ages (draws, positions, n)."""
        lives = self.roles[0]
        rest = (lives.shape, lives.rate, lives.early, lives.scale, lives.deviation)
        shape, rate, early, scale, deviation = (each[:, positions, None] for each in rest)
        return _Lives(shape, rate, early, lives.early_until[positions][:, None], scale, deviation).cumulative(ages)

    def end(
        self, role: IntArray, age: FloatArray, exponential: FloatArray, draw: IntArray, position: IntArray
    ) -> FloatArray:
        """Age at failure of parts (n,) aged `age`, given exponential variates; role 0 runs, 1 is fitted, 2 later."""
        result = np.empty(age.shape)
        for number, lives in enumerate(self.roles):
            same = np.flatnonzero(role == number)
            if same.size:
                result[same] = lives.at(draw[same], position[same]).end(age[same], exponential[same])
        return result


@dataclass(frozen=True, eq=False)
class _Lives:
    """Arrays (draws, positions), early_until (positions,); or all of them (n,), see `at`."""

    shape: FloatArray
    rate: FloatArray
    early: FloatArray
    early_until: FloatArray
    scale: FloatArray
    deviation: FloatArray

    def at(self, draw: IntArray, position: IntArray) -> _Lives:
        """The parameters of these draws and positions, (n,)."""
        until = self.early_until[position]
        rest = (self.shape, self.rate, self.early, self.scale, self.deviation)
        shape, rate, early, scale, deviation = (column[draw, position] for column in rest)
        return _Lives(shape, rate, early, until, scale, deviation)

    def end(self, age: FloatArray, exponential: FloatArray) -> FloatArray:
        until = self.early_until
        if not until.any():
            return self._age_at(self._unit(age) + exponential / self.rate)
        target = self.cumulative(age) + exponential
        whole = -np.log1p(-self.early)
        beyond = self._age_at(np.maximum(target - whole, 0.0) / self.rate + self._unit(until))
        with np.errstate(divide="ignore", invalid="ignore"):
            within = until * -np.expm1(-target) / self.early
        return np.where((target < whole) & (until > 0), within, beyond)

    def cumulative(self, age: FloatArray) -> FloatArray:
        """-log S."""
        until = self.early_until
        safe = np.where(until > 0, until, 1.0)
        first = -np.log1p(-self.early * np.minimum(age, until) / safe)
        return first + self.rate * (self._unit(np.maximum(age, until)) - self._unit(until))

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


def _lives(found: DesignDraws, design: IntArray, site: IntArray) -> _Lives:
    deviation = np.zeros((len(found.shapes), design.size)) if found.deviations is None else found.deviations[:, design]
    return _Lives(
        found.shapes[:, design],
        found.rates[:, design, site],
        found.early[:, design],
        found.early_until[design],
        found.scales[:, design],
        deviation,
    )
