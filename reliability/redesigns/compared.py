"""The lives of old and new parts side by side, from the records: all of them, or only those watched at the same time.

Water, season and habits change with the calendar, so “the same positions before” is no control. `at_the_same_time`
takes each site from the day its first new part went in: old parts still there enter at their age on that day.
"""

from __future__ import annotations

import datetime as dt
from collections.abc import Collection, Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fleet.models import Component, FailureMode, Part, Site, SiteKind
from reliability.fleet_lives import NO_PLACE
from reliability.life_question import keys_of
from reliability.life_rules import Reason
from reliability.redesigns.life_columns import FAILED, STATES, among, told
from reliability.redesigns.lives_of_positions import PositionLives, PositionRecords, position_records
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.ranks import ranked

BEFORE, AFTER = "before", "after"
COLUMNS = ("modules", "positions", "parts", "state_codes", "fitted", "begun", "ended", "mode_codes", "rigs")
OTHER_MODE = "other mode"
ALL_STATES = np.array([*STATES, OTHER_MODE])


@dataclass(frozen=True, eq=False)
class Compared:
    """One row a life. lifetimes.groups is before or after; the other columns have its length.

    modules: the records' own numbers. positions: a number for each place in each module. state_codes: places among
    ALL_STATES; mode_codes: places among mode_labels, the codes of failure modes (empty: none).
    begun, ended: ordinal days of the fitting (or of the start of observation) and of the end of observation.
    rigs: True on a test stand.
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
    state_codes: NDArray[np.int8]
    fitted: NDArray[np.int64]
    begun: NDArray[np.float64]
    ended: NDArray[np.float64]
    mode_codes: NDArray[np.int64]
    mode_labels: NDArray[Any]
    rigs: NDArray[np.bool_]
    starts: dict[str, dt.date]
    left_out: dict[str, int]

    @property
    def states(self) -> NDArray[Any]:
        """As in `FleetLives`."""
        return ALL_STATES[self.state_codes]

    @property
    def modes(self) -> NDArray[Any]:
        """Code of each life's failure mode, empty where none."""
        return self.mode_labels[self.mode_codes]

    def in_state(self, *states: str) -> NDArray[np.bool_]:
        return np.isin(ALL_STATES, states)[self.state_codes]

    @cached_property
    def is_new(self) -> NDArray[np.bool_]:
        """True for lives of the new parts."""
        if self.lifetimes is None:
            return np.zeros(0, dtype=bool)
        return np.asarray(self.lifetimes.group_labels == AFTER)[self.lifetimes.group_codes]

    @cached_property
    def pooled(self) -> Lifetimes | None:
        """Equal lives of one side at one site in one row: for all that asks for no position."""
        return None if self.lifetimes is None else self.lifetimes.grouped()

    def pooled_by_mode(self) -> tuple[Lifetimes, NDArray[Any]]:
        """The same with only failures of one mode in a row, and the modes of the rows."""
        assert self.lifetimes is not None
        rows, codes = self.lifetimes.grouped_with(self.mode_codes)
        return rows, self.mode_labels[codes]

    def pooled_by_state(self) -> tuple[Lifetimes, NDArray[Any]]:
        """The same with only lives of one state in a row, and the states of the rows."""
        assert self.lifetimes is not None
        rows, codes = self.lifetimes.grouped_with(self.state_codes.astype(np.int64))
        return rows, ALL_STATES[codes]

    def side(self, side: str) -> Lifetimes | None:
        """The lives of one side, equal ones in one row; None where it has none."""
        return _side(self.pooled, side)

    def side_of_positions(self, side: str) -> Lifetimes | None:
        """The lives of one side, each in a row of its own."""
        return _side(self.lifetimes, side)

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
        others = self.lifetimes.observed & ~np.isin(self.mode_labels, list(modes))[self.mode_codes]
        states = np.where(others, np.int8(len(STATES)), self.state_codes)
        return replace(self, lifetimes=self.lifetimes.withdrawn_where(others), state_codes=states)


def _side(lives: Lifetimes | None, side: str) -> Lifetimes | None:
    if lives is None:
        return None
    chosen = np.asarray(lives.group_labels == side)[lives.group_codes]
    if not chosen.any():
        return None
    return lives.subset(chosen)


def all_history(
    component: Component,
    new: Sequence[str],
    old: Sequence[str],
    *,
    records: PositionRecords | None = None,
    with_rigs: bool = False,
    **choices: Any,
) -> Compared:
    """Every life of the old and the new parts, whenever it was. records: as read before, of these parts or more."""
    records, sites = _records(component, [*new, *old], records, **choices)
    return _compared(records, new, old, records.lives(sites=sites, with_rigs=with_rigs), {})


def at_the_same_time(
    component: Component,
    new: Sequence[str],
    old: Sequence[str],
    *,
    not_before: dt.date | None = None,
    records: PositionRecords | None = None,
    **choices: Any,
) -> Compared:
    """Only sites with a new part, each from its first day on (or from `not_before`, where that is later)."""
    records, sites = _records(component, [*new, *old], records, **choices)
    fields = dict(Site.objects.filter(kind=SiteKind.FIELD).values_list("pk", "code"))
    first = records.first_fitted(_keys(component, new))
    starts = {site: max(day, not_before or day) for site, day in first.items() if site in fields}
    if starts:
        sites = [site for site in starts if sites is None or site in sites]
    return _compared(records, new, old, records.lives(starts, sites=sites), starts)


def _records(
    component: Component,
    parts: Sequence[str],
    records: PositionRecords | None,
    *,
    as_of: dt.date,
    clock: str | None = None,
    sites: Sequence[str] | None = None,
) -> tuple[PositionRecords, Collection[int] | None]:
    """What the records hold of these parts, and the numbers of the sites asked for."""
    if records is None:
        records = position_records(component, parts, as_of=as_of, clock=clock)
    return records.of_parts(_keys(component, parts)), keys_of(Site, sites, "site")


def _keys(component: Component, parts: Sequence[str]) -> tuple[int, ...]:
    return keys_of(Part, parts, "part", component=component) or ()


def _compared(
    records: PositionRecords, new: Sequence[str], old: Sequence[str], lives: PositionLives, starts: dict[int, dt.date]
) -> Compared:
    component = records.asked.component
    named = dict(Part.objects.filter(component=component).values_list("pk", "code"))
    modes = dict(FailureMode.objects.filter(component=component).values_list("pk", "code"))
    sites = {pk: (code, kind) for pk, code, kind in Site.objects.values_list("pk", "code", "kind")}
    codes = {0: NO_PLACE, **{pk: code for pk, (code, _) in sites.items()}}
    began = {site: day.toordinal() for site, day in starts.items()}
    rigs = [pk for pk, (_, kind) in sites.items() if kind == SiteKind.RIG]
    is_new = among(lives.part, _keys(component, new))
    mode_labels, mode_codes = _labels(lives.mode, {0: "", **modes})[1]
    return Compared(
        component=component,
        clock=records.asked.clock,
        as_of=records.asked.as_of,
        new=tuple(new),
        old=tuple(old),
        lifetimes=_lifetimes(lives, is_new, codes),
        modules=lives.module,
        positions=ranked(lives.place)[1],
        parts=_labels(lives.part, named)[0],
        state_codes=lives.state,
        fitted=lives.fitted_day,
        begun=np.maximum(lives.fitted_day, told(lives.site, began, 0)).astype(float),
        ended=lives.last_day,
        mode_codes=mode_codes,
        mode_labels=mode_labels,
        rigs=among(lives.site, rigs),
        starts={sites[site][0]: day for site, day in starts.items()},
        left_out=lives.left_out,
    )


def _lifetimes(lives: PositionLives, is_new: NDArray[np.bool_], codes: dict[int, str]) -> Lifetimes | None:
    if not lives.entry.size:
        return None
    places, site_index = _labels(lives.site, codes)
    sides, group_index = _labels(is_new.astype(np.int64), {0: BEFORE, 1: AFTER})
    made = Lifetimes(
        durations=lives.duration,
        observed=lives.state == FAILED,
        entries=lives.entry,
        last_good=lives.last_good,
        sites=places,
        groups=sides,
    )
    return made.knowing(sites=site_index, groups=group_index)


def _labels(numbers: NDArray[np.int64], named: dict[int, str]) -> tuple[NDArray[Any], tuple[NDArray[Any], Any]]:
    """The label of each number, and the distinct ones in order with the place of each row among them."""
    present, place = ranked(numbers)
    found = np.array([named.get(number, "") for number in present.tolist()] or [""])
    distinct, order = np.unique(found, return_inverse=True)
    return found[place], (distinct[: present.size], order[place])
