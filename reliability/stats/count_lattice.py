"""The grid of a forecast where failures are found only at visits: one place a visit."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reliability.stats.count_masses import Ends, Hazards, since_start, with_unknown_ages
from reliability.stats.count_positions import Classes, Rows

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class VisitGrid:
    """Places are visits: place j of a class is the time visit_next + (j - 1) visit_every; tails are known after j
    visits.

    A part failed between two visits is found and replaced at the second: mass F(jv) - F((j - 1)v). One removed for
    another reason, or due for planned replacement, is replaced at the visit too, if it has not failed.
    """

    visits: int

    @property
    def places(self) -> int:
        """Number of places tails are known at."""
        return self.visits + 1

    @property
    def at(self) -> IntArray:
        """Places of the masses of running parts."""
        return np.arange(1, self.visits + 1)

    def place_of(self, time: FloatArray, classes: Classes) -> FloatArray:
        """Number of visits up to a time, (len(classes),)."""
        seen = np.floor((time - classes.visit_next) / classes.visit_every + 1e-9) + 1.0
        return np.clip(seen, 0.0, self.visits)

    def new(self, hazards: Hazards, classes: Classes, duty: FloatArray) -> tuple[Ends, Ends]:
        """Masses of parts fitted at a visit, and cumulative shares, (draws, classes, places)."""
        time = np.arange(self.places) * classes.visit_every[:, None]
        cumulative = hazards.cumulative(time[None] * duty[:, :, None])
        due = time * duty[:, :, None] >= classes.replace_at[:, None] - 1e-9
        masses = _found_at_visits(cumulative, classes.other_removals[:, None] * time, due)
        placed = [None if mass is None else np.pad(mass, ((0, 0), (0, 0), (1, 0))) for mass in masses]
        return Ends(*placed), Ends(*(None if mass is None else np.cumsum(mass, axis=2) for mass in placed))

    def running(
        self, hazards: Hazards, rows: Rows, index: IntArray, duty: FloatArray
    ) -> tuple[Ends, FloatArray | None, FloatArray | None]:
        """Ends at the visits to come, (draws, rows, visits); a running part was good at the last visit.

        A row that starts with a new part (a stopped module) can fail only after its start.
        """
        classes, which = rows.classes, rows.class_index[index]
        every, upcoming = classes.visit_every[which][:, None], classes.visit_next[which][:, None]
        visit = upcoming + np.arange(-1, self.visits) * every
        start = rows.start[index][:, None]
        fresh = ~np.isnan(start)
        joined = classes.join_at[which][:, None]
        since = np.where(fresh, np.maximum(visit - start, 0.0), visit)
        since = np.where(joined > 0, np.maximum(since - joined, 0.0), since)
        factor = duty[:, which][:, :, None]
        age = np.maximum(rows.age[index][:, None] + since[None] * factor, 0.0)
        cumulative = hazards.cumulative(age, which)
        other = classes.other_removals[which][:, None] * np.maximum(since, 0.0)
        due = (age >= classes.replace_at[which][:, None] - 1e-9) & (since > 0.0)
        survived = with_unknown_ages(since_start(cumulative), hazards, rows, index, age)
        masses = _found_at_visits(survived, other, due)
        return Ends(*masses), None, None


def _found_at_visits(
    cumulative: FloatArray, other: FloatArray, due: NDArray[np.bool_]
) -> tuple[FloatArray, FloatArray | None, FloatArray | None]:
    """Masses at visits 1 .. from cumulative hazards at visits 0 ..: failed since the last one, else removed, else
    planned.
    """
    alive = np.exp(-cumulative)
    kept = np.exp(-other)
    # a part due for replacement is gone after that visit
    before = np.concatenate([np.zeros_like(due[..., :1]), np.cumsum(due, axis=-1)[..., :-1] > 0], axis=-1)
    here = ~before[..., 1:] & np.ones(cumulative[..., 1:].shape, dtype=bool)
    failed = (alive[..., :-1] - alive[..., 1:]) * kept[..., :-1] * here
    removed = alive[..., 1:] * (kept[..., :-1] - kept[..., 1:]) * here if other.any() else None
    planned = alive[..., 1:] * kept[..., 1:] * (due[..., 1:] & here) if due.any() else None
    return failed, removed, planned
