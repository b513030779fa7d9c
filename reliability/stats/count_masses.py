"""How the lives of new and of running parts end on the grid of a forecast: failed, removed otherwise, or planned."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import log_ndtr

from reliability.stats.count_positions import Classes, Rows
from reliability.stats.unknown_ages import hazard_since

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class Hazards:
    """Cumulative hazards of the lives of some draws and classes: rate * t^shape, with an early share.

    Arrays (draws, classes), early_until (classes,): a share `early` fails evenly before that age, the others live
    Weibull given survival to it.
    """

    shape: FloatArray
    rate: FloatArray
    early: FloatArray
    early_until: FloatArray
    scale: FloatArray | None = None  # with deviation: medians of lognormal draws, whose deviation is above 0
    deviation: FloatArray | None = None

    def take(self, chosen: IntArray) -> Hazards:
        """Those of the chosen classes."""
        scale = None if self.scale is None else self.scale[:, chosen]
        deviation = None if self.deviation is None else self.deviation[:, chosen]
        columns = (self.shape[:, chosen], self.rate[:, chosen], self.early[:, chosen], self.early_until[chosen])
        return Hazards(*columns, scale, deviation)

    def cumulative(self, ages: FloatArray, classes: IntArray | slice = slice(None)) -> FloatArray:
        """-log S at ages (draws or 1, x, n), x matching the rates of `classes`: (draws, x, n)."""
        rate = self.rate[:, classes][:, :, None]
        if not self.early_until.any():
            return rate * self._unit(ages, classes)
        until = self.early_until[classes][None, :, None]
        within = np.minimum(ages, until) / np.where(until > 0, until, 1.0)
        first = -np.log1p(-self.early[:, classes][:, :, None] * within)
        return first + rate * (self._unit(np.maximum(ages, until), classes) - self._unit(until, classes))

    def _unit(self, ages: FloatArray, classes: IntArray | slice) -> FloatArray:
        """Cumulative hazard at rate 1, (draws, x, n)."""
        with np.errstate(divide="ignore", over="ignore"):
            return self._unit_at(np.log(ages), classes)

    def _unit_at(self, logs: FloatArray, classes: IntArray | slice) -> FloatArray:
        shape = self.shape[:, classes][:, :, None]
        if self.deviation is None or self.scale is None or not self.deviation.any():
            return np.exp(shape * logs)
        deviation, scale = self.deviation[:, classes], self.scale[:, classes]
        result = np.empty(np.broadcast_shapes(logs.shape, shape.shape))
        logs = np.broadcast_to(logs, result.shape)
        lognormal = deviation > 0
        result[~lognormal] = np.exp(self.shape[:, classes][~lognormal][:, None] * logs[~lognormal])
        place, width = np.log(scale[lognormal])[:, None], deviation[lognormal][:, None]
        result[lognormal] = -log_ndtr((place - logs[lognormal]) / width)
        return result


@dataclass(frozen=True, eq=False)
class Ends:
    """Masses by which a life ends at the places of a grid, by kind, each (draws, x, places); None where none ends
    so.
    """

    failed: FloatArray
    removed: FloatArray | None
    planned: FloatArray | None

    def of_draws(self, draws: IntArray) -> Ends:
        """Those of some of the draws."""
        removed, planned = (None if mass is None else mass[draws] for mass in (self.removed, self.planned))
        return Ends(self.failed[draws], removed, planned)

    def split(self, kind: str, taken_share: float = 0.0) -> tuple[FloatArray, FloatArray | None]:
        """(counted, silent) masses for "failures", "parts" (less the taken share of removals) or "planned"."""
        others = [mass for mass in (self.removed, self.planned) if mass is not None]
        if kind == "failures":
            return self.failed, sum(others[1:], others[0]) if others else None
        if kind == "planned":
            silent = self.failed if self.removed is None else self.failed + self.removed
            return (np.zeros_like(self.failed) if self.planned is None else self.planned), silent
        if taken_share and self.removed is not None:
            own = self.failed + (1.0 - taken_share) * self.removed
            return (own if self.planned is None else own + self.planned), taken_share * self.removed
        return sum(others, self.failed), None


@dataclass(frozen=True, eq=False)
class MidpointGrid:
    """`cells` equal cells of each class's horizon: masses at odd places 1, 3, ..., tails at places 0 .. 2 cells."""

    cells: int
    refit_delay: float = 0.0  # from a failure to the first moment the new part can fail, in the unit of the horizon

    @property
    def places(self) -> int:
        """Number of places tails are known at."""
        return 2 * self.cells + 1

    @property
    def at(self) -> IntArray:
        """Places of the masses of running parts: the very start, for parts long overdue, then midpoints."""
        return np.concatenate([[0], np.arange(1, 2 * self.cells, 2)])

    def place_of(self, time: FloatArray, classes: Classes) -> FloatArray:
        """Real place of a time since the start, (len(classes),)."""
        within = classes.horizon > 0
        place = time / np.where(within, classes.horizon, 1.0) * (2 * self.cells)
        return np.where(within, place, np.where(time > 0, np.inf, 0.0))

    def new(self, hazards: Hazards, classes: Classes, duty: FloatArray) -> tuple[Ends, Ends]:
        """Masses of new parts, and the exact cumulative shares, (draws, classes, places)."""
        fraction = np.arange(self.places) / (2.0 * self.cells)
        time = np.maximum(fraction * classes.horizon[:, None] - self.refit_delay, 0.0)
        limit = classes.replace_at[:, None] / duty[:, :, None]
        clipped = np.minimum(time[None], limit)
        cumulative = hazards.cumulative(clipped * duty[:, :, None])
        failed, removed, alive = _competing(cumulative, classes.other_removals[:, None] * clipped)
        shares = [_summed(half) for half in (failed, removed)]
        planned = planned_by = None
        if np.isfinite(classes.replace_at).any():
            place = self.place_of(classes.replace_at / duty, classes)
            planned = _atom(place, alive[..., -1], self.places)
            planned_by = np.cumsum(planned, axis=2) - planned / 2.0
        masses = Ends(*(_at_midpoints(half, hazards.shape) for half in (failed, removed)), planned)
        return masses, Ends(*shares, planned_by)

    def running(
        self, hazards: Hazards, rows: Rows, index: IntArray, duty: FloatArray
    ) -> tuple[Ends, FloatArray | None, FloatArray | None]:
        """Ends of running parts at `at`, (draws, rows, cells), then weight and place of planned replacement if any."""
        classes, which = rows.classes, rows.class_index[index]
        fraction = np.arange(self.cells + 1) / self.cells
        joined = classes.join_at[which][:, None]
        time = np.maximum(fraction * classes.horizon[which][:, None] - joined, 0.0)
        age = rows.age[index][:, None]
        factor = duty[:, which][:, :, None]
        limit = (classes.replace_at[which][:, None] - age) / factor
        clipped = np.minimum(time[None], limit)
        since = since_start(hazards.cumulative(age + clipped * factor, which))
        since = with_unknown_ages(since, hazards, rows, index, age + clipped * factor)
        failed, removed, alive = _competing(since, classes.other_removals[which][:, None] * clipped)
        share = _start_share(np.log(np.maximum(alive[..., 0] / np.maximum(alive[..., 1], 1e-300), 1.0)))
        ends = Ends(*(_with_start(mass, share) for mass in (failed, removed)), None)
        if not np.isfinite(limit).any():
            return ends, None, None
        horizon = classes.horizon[which]
        place = (limit + joined)[..., 0] / np.where(horizon > 0, horizon, 1e-9) * (2 * self.cells)
        return ends, alive[..., -1], place


def with_unknown_ages(since: FloatArray, hazards: Hazards, rows: Rows, index: IntArray, ages: FloatArray) -> FloatArray:
    """The same, where the ages (draws, rows, n) are the least that some parts can have."""
    which = rows.class_index[index]
    oldest = rows.classes.oldest[which]
    unknown = np.flatnonzero((oldest > rows.age[index]) & np.isnan(rows.start[index]))
    if not unknown.size:
        return since
    least = ages[:, unknown]
    most = least[..., 0] + (oldest - rows.age[index])[unknown]
    gone = least - least[..., :1]
    since[:, unknown] = hazard_since(lambda at: hazards.cumulative(at, which[unknown]), least[..., 0], most, gone)
    return since


def since_start(cumulative: FloatArray) -> FloatArray:
    """Cumulative hazard since the first place; a part impossibly old for its life fails at once."""
    with np.errstate(invalid="ignore"):
        since = cumulative - cumulative[..., :1]
    lost = ~np.isfinite(since)
    if lost.any():
        since = np.where(lost, 1e3, since)
        since[..., 0] = 0.0
    return since


def _competing(cumulative: FloatArray, other: FloatArray) -> tuple[FloatArray, FloatArray | None, FloatArray]:
    """Masses of cells by failure and by other removal, and survival of both, from cumulative hazards at cell edges.

    A cell's mass is shared as its two hazards: exact where they are proportional within the cell.
    """
    if not other.any():
        alive = np.exp(-cumulative)
        return alive[..., :-1] - alive[..., 1:], None, alive
    alive = np.exp(-cumulative - other)
    ended = alive[..., :-1] - alive[..., 1:]
    by_failure, by_other = np.diff(cumulative, axis=-1), np.diff(other, axis=-1)
    failed = ended * (by_failure / np.maximum(by_failure + by_other, 1e-300))
    return failed, ended - failed, alive


def _summed(half: FloatArray | None) -> FloatArray | None:
    if half is None:
        return None
    total = np.zeros((*half.shape[:2], half.shape[2] + 1))
    np.cumsum(half, axis=2, out=total[..., 1:])
    return total


def _at_midpoints(half: FloatArray | None, shape: FloatArray) -> FloatArray | None:
    """Masses of whole cells at their midpoints; the first cell's mean kept where the hazard falls from infinity."""
    if half is None:
        return None
    masses = np.zeros((*half.shape[:2], half.shape[2] + 1))
    masses[..., 1::2] = half[..., ::2] + half[..., 1::2]
    # the mean age at failure within a short first cell is its length times shape / (shape + 1)
    share = np.maximum(1.0 - 2.0 * shape / (shape + 1.0), 0.0)
    masses[..., 0] = share * masses[..., 1]
    masses[..., 1] -= masses[..., 0]
    return masses


def _start_share(hazard: FloatArray) -> FloatArray:
    """Share of a cell's mass to put at its start so that the mean is that of a constant hazard, `hazard` over the
    cell.
    """
    h = np.clip(hazard, 1e-3, 500.0)
    return 1.0 - 2.0 * (1.0 / h - 1.0 / np.expm1(h))


def _with_start(mass: FloatArray | None, share: FloatArray) -> FloatArray | None:
    if mass is None:
        return None
    moved = mass[..., :1] * share[..., None]
    return np.concatenate([moved, mass[..., :1] - moved, mass[..., 1:]], axis=2)


def _atom(place: FloatArray, weight: FloatArray, places: int) -> FloatArray:
    """A mass at a real place, shared by the two whole places beside it; nothing beyond the grid."""
    masses = np.zeros((*place.shape, places + 1))
    inside = np.minimum(place, places)
    left = np.minimum(np.floor(inside).astype(np.int64), places - 1)
    share = inside - left
    kept = np.where(place < places, weight, 0.0)
    np.put_along_axis(masses, left[..., None], (kept * (1.0 - share))[..., None], axis=-1)
    right = np.take_along_axis(masses, left[..., None] + 1, axis=-1) + (kept * share)[..., None]
    np.put_along_axis(masses, left[..., None] + 1, right, axis=-1)
    return masses[..., :places]
