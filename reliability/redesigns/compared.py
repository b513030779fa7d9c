"""The lives of old and new parts side by side, from the records: all of them, or only those watched at the same time.

Water, season and habits change with the calendar, so “the same positions before” is no control. `at_the_same_time`
takes each site from the day its first new part went in: old parts still there enter at their age on that day.
"""

from __future__ import annotations

import datetime as dt
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fleet.models import Component, FailureMode, Part, Site, SiteKind
from reliability.fleet_lives import NO_PLACE
from reliability.life_rules import Reason
from reliability.lives_of_positions import PositionLife, first_fitted, lives_of_positions
from reliability.stats.lifetimes import Lifetimes

BEFORE, AFTER = "before", "after"
COLUMNS = ("modules", "positions", "parts", "states", "fitted", "begun", "ended", "modes", "rigs")


@dataclass(frozen=True, eq=False)
class Compared:
    """One row a life. lifetimes.groups is before or after; the other columns have its length.

    modules: the records' own numbers. positions: a number for each place in each module. states: as in `FleetLives`.
    begun, ended: ordinal days of the fitting (or of the start of observation) and of the end of observation.
    modes: code of the failure mode, empty where none. rigs: True on a test stand.
    starts: for each site the day from which it is looked at; empty where all history counts.
    """

    component: Component
    clock: str
    as_of: dt.date
    new: tuple[str, ...]
    old: tuple[str, ...]
    lifetimes: Lifetimes | None
    modules: NDArray[np.int64]
    positions: NDArray[np.int64]
    parts: NDArray[Any]
    states: NDArray[Any]
    fitted: NDArray[np.int64]
    begun: NDArray[np.float64]
    ended: NDArray[np.float64]
    modes: NDArray[Any]
    rigs: NDArray[np.bool_]
    starts: dict[str, dt.date]
    left_out: dict[str, int]

    def side(self, side: str) -> Lifetimes | None:
        """The lives of one side; None where it has none."""
        if self.lifetimes is None:
            return None
        chosen = self.lifetimes.groups == side
        return self.lifetimes.subset(chosen) if chosen.any() else None

    def chosen(self, rows: NDArray[np.bool_]) -> Compared:
        """The same with these rows only."""
        lifetimes = self.lifetimes.subset(rows) if self.lifetimes is not None and rows.any() else None
        return replace(self, lifetimes=lifetimes, **{name: getattr(self, name)[rows] for name in COLUMNS})

    def without_rigs(self) -> Compared:
        """The lives in the field; those on test stands are counted as left out."""
        on_stands = int(self.rigs.sum())
        if not on_stands:
            return self
        left_out = {**self.left_out, Reason.RIG.value: self.left_out.get(Reason.RIG.value, 0) + on_stands}
        return replace(self.chosen(~self.rigs), left_out=left_out)

    def if_only(self, modes: Sequence[str]) -> Compared:
        """The same lives if only these failure modes acted: other failures count as withdrawals in good order."""
        if self.lifetimes is None:
            return self
        others = self.lifetimes.observed & ~np.isin(self.modes, list(modes))
        states = np.where(others, "other mode", self.states)
        return replace(self, lifetimes=self.lifetimes.withdrawn_where(others), states=states)

    def as_seen_on(self, day: int) -> Compared:
        """The lives as they stood on an earlier (ordinal) day, for the path of the evidence.

        Ages on that day lie on a straight line through each life's use; what ended later was still running.
        """
        if self.lifetimes is None:
            return self
        lives, later = self.lifetimes, self.ended > day
        share = np.clip((day - self.begun) / np.maximum(self.ended - self.begun, 1.0), 0.0, 1.0)
        durations = np.where(
            later, np.floor(lives.entries + share * (lives.durations - lives.entries) + 1e-9), lives.durations
        )
        seen = durations > lives.entries
        if not seen.any():
            return self.chosen(np.zeros(len(lives), dtype=bool))
        cut = Lifetimes(
            durations[seen],
            (lives.observed & ~later)[seen],
            entries=lives.entries[seen],
            last_good=np.where(later, np.nan, lives.last_good)[seen],
            sites=lives.sites[seen],
            groups=lives.groups[seen],
        )
        states = np.where(later, "running", self.states)
        return replace(self.chosen(seen), lifetimes=cut, states=states[seen])


def all_history(component: Component, new: Sequence[str], old: Sequence[str], **choices: Any) -> Compared:
    """Every life of the old and the new parts, whenever it was."""
    return _compared(component, new, old, {}, choices)


def at_the_same_time(
    component: Component, new: Sequence[str], old: Sequence[str], *, not_before: dt.date | None = None, **choices: Any
) -> Compared:
    """Only sites with a new part, each from its first day on (or from `not_before`, where that is later)."""
    first = first_fitted(component.code, list(new), choices["as_of"])
    fields = set(Site.objects.filter(kind=SiteKind.FIELD).values_list("pk", flat=True))
    starts = {site: max(day, not_before or day) for site, day in first.items() if site in fields}
    return _compared(component, new, old, starts, choices)


def _compared(
    component: Component,
    new: Sequence[str],
    old: Sequence[str],
    starts: dict[int, dt.date],
    choices: dict[str, Any],
) -> Compared:
    asked = {"parts": [*new, *old], "also": "mode", **choices}
    if starts:
        wanted = choices.get("sites")
        codes = dict(Site.objects.filter(pk__in=starts).values_list("pk", "code"))
        asked["sites"] = [code for code in codes.values() if wanted is None or code in wanted]
    rows = lives_of_positions(component, starts=starts, **asked)
    named = {part.pk: part.code for part in Part.objects.filter(component=component)}
    sites = {pk: (code, kind) for pk, code, kind in Site.objects.values_list("pk", "code", "kind")}
    modes = dict(FailureMode.objects.filter(component=component).values_list("pk", "code"))
    left_out: Counter[str] = Counter(row.left_out for row in rows if row.left_out is not None)
    kept = [row for row in rows if row.left_out is None]
    began = {site: day.toordinal() for site, day in starts.items()}
    parts = np.array([named[row.part] for row in kept], dtype=object)
    place = [sites.get(row.site or 0, (NO_PLACE, "")) for row in kept]
    return Compared(
        component=component,
        clock=asked.get("clock") or component.clock,
        as_of=choices["as_of"],
        new=tuple(new),
        old=tuple(old),
        lifetimes=_lifetimes(kept, np.isin(parts, list(new)), [code for code, _ in place]),
        modules=np.array([row.module for row in kept], dtype=np.int64),
        positions=_numbered(kept),
        parts=parts,
        states=np.array([row.state for row in kept], dtype=object),
        fitted=np.array([row.fitted_day or 0 for row in kept], dtype=np.int64),
        begun=np.array([max(row.fitted_day or 0, began.get(row.site or 0, 0)) for row in kept], dtype=float),
        ended=np.array([row.last_day or 0 for row in kept], dtype=float),
        modes=np.array([modes.get(row.also, "") for row in kept], dtype=object),
        rigs=np.array([kind == SiteKind.RIG for _, kind in place], dtype=bool),
        starts={sites[site][0]: day for site, day in starts.items()},
        left_out=dict(left_out),
    )


def _lifetimes(rows: list[PositionLife], is_new: NDArray[np.bool_], places: list[str]) -> Lifetimes | None:
    if not rows:
        return None
    return Lifetimes(
        durations=np.array([row.duration for row in rows], dtype=float),
        observed=np.array([row.state == "failed" for row in rows]),
        entries=np.array([row.entry for row in rows], dtype=float),
        last_good=np.array([np.nan if row.last_good is None else row.last_good for row in rows], dtype=float),
        sites=np.array(places),
        groups=np.where(is_new, AFTER, BEFORE),
    )


def _numbered(rows: list[PositionLife]) -> NDArray[np.int64]:
    """One number for each position of each module."""
    places = np.array([(row.module, row.position) for row in rows], dtype=np.int64).reshape(-1, 2)
    return np.unique(places, axis=0, return_inverse=True)[1].reshape(-1).astype(np.int64)
