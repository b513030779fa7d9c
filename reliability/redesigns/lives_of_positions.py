"""Lives one by one, each with its position: what a comparison within positions needs, under the rules of all lives.

The fittings are read once; what is asked of them (all history, or each site from a day on) is answered from columns.
"""

from __future__ import annotations

import datetime as dt
from collections import Counter
from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any

import numpy as np

from fleet.models import FAILURE_REASONS, Module, Placement, Position, Site, SiteKind
from reliability.life_question import Asked, asked_of
from reliability.lifetimes_from_fleet import reporting_lags
from reliability.redesigns.fitting_columns import REASONS, FittingColumns, read_fittings
from reliability.redesigns.life_columns import (
    STATES,
    Choices,
    Ends,
    Floats,
    LifeColumns,
    Numbers,
    SiteFacts,
    among,
    ends_of,
    lives_of,
)

DAY_BITS = 22  # of an ordinal day


@dataclass(frozen=True, eq=False)
class PositionLives:
    """One row a life, in the order of module, position and day; numbers are the database's own, 0 for none.

    states: index into STATES. place: a number for each position of each module, in the order of their codes.
    """

    module: Numbers
    place: Numbers
    part: Numbers
    mode: Numbers  # of failures only
    state: Any
    entry: Floats
    duration: Floats
    last_good: Floats
    site: Numbers
    fitted_day: Numbers
    last_day: Floats
    left_out: dict[str, int]


@dataclass(frozen=True, eq=False)
class PositionRecords:
    """The fittings of some parts as they stood on a day, in the order of module, position and day."""

    asked: Asked
    fittings: FittingColumns
    place: Numbers
    facts: SiteFacts
    stays: dict[int, int]

    def lives(
        self,
        starts: Mapping[int, dt.date] | None = None,
        *,
        sites: Collection[int] | None = None,
        with_rigs: bool = False,
    ) -> PositionLives:
        """Those at the sites (None: all). `starts` gives each site the day on which observation begins there: a part
        that was already in enters at its age on that day, and what ended before is left out."""
        days = {site: day.toordinal() for site, day in (starts or {}).items()}
        choices = replace(self._choices, sites=sites, with_rigs=with_rigs)
        return self._told(lives_of(self.fittings, self._ends, choices, self.facts, days))

    @property
    def _choices(self) -> Choices:
        asked = self.asked
        return Choices(asked.clock, asked.clock == asked.component.clock, asked.as_of.toordinal())

    @cached_property
    def _ends(self) -> Ends:
        """What ended each fitting is the same whatever is asked of it."""
        return ends_of(self.fittings, self._choices, self.facts, self.stays)

    def of_parts(self, parts: Collection[int]) -> PositionRecords:
        """The same of some of the parts."""
        rows = among(self.fittings.part, parts)
        if rows.all():
            return self
        return replace(self, fittings=self.fittings.chosen(rows), place=self.place[rows])

    def _told(self, lives: LifeColumns) -> PositionLives:
        rows, fittings = lives.rows, self.fittings
        return PositionLives(
            module=fittings.module[rows],
            place=self.place[rows],
            part=fittings.part[rows],
            mode=np.where(lives.state == STATES.index("failed"), fittings.mode[rows], 0),
            state=lives.state,
            entry=lives.entry,
            duration=lives.duration,
            last_good=lives.last_good,
            site=lives.site,
            fitted_day=fittings.fitted_day[rows],
            last_day=lives.last_day,
            left_out=lives.left_out,
        )

    def first_fitted(self, parts: Sequence[int]) -> dict[int, dt.date]:
        """For each site the day on which the first of these parts went in there."""
        known = among(self.fittings.part, parts) & (self.fittings.fitted_day > 0) & (self.fittings.site > 0)
        sites, days = self.fittings.site[known], self.fittings.fitted_day[known]
        first = np.full(int(sites.max(initial=0)) + 1, 2**DAY_BITS)
        np.minimum.at(first, sites, days)
        return {site: dt.date.fromordinal(int(first[site])) for site in np.unique(sites).tolist()}


def position_records(
    component: Any, parts: Sequence[str], *, as_of: dt.date | None = None, clock: str | None = None
) -> PositionRecords:
    """What the records say of the fittings of these parts up to a day."""
    asked = asked_of(component, parts=parts, as_of=as_of, clock=clock)
    kinds = list(Site.objects.values_list("pk", "kind", "reports_at_once"))
    prompt = frozenset(pk for pk, _, at_once in kinds if at_once)
    late = [pk for pk, _, at_once in kinds if not at_once]
    fittings = read_fittings(asked.parts or (), asked.clock, asked.as_of.toordinal(), asked.as_of.isoformat(), late)
    place = _places(fittings)
    order = np.argsort(place * 2**DAY_BITS + fittings.fitted_day, kind="stable")
    fittings, place = fittings.chosen(order), place[order]
    counted = _late(fittings, prompt)
    lags = reporting_lags(asked.as_of, counted=counted, without_parts=asked.parts or ())
    rigs = frozenset(pk for pk, kind, _ in kinds if kind == SiteKind.RIG)
    return PositionRecords(asked, fittings, place, SiteFacts(prompt, rigs, lags), _stays(asked.as_of))


def _places(fittings: FittingColumns) -> Numbers:
    """A number for each position of each module, in the order of their codes and not of the database's numbers."""
    modules = _ranks(Module.objects.values_list("pk", "code"))
    positions = _ranks(Position.objects.values_list("pk", "code"))
    return modules[fittings.module] * np.int64(positions.max(initial=0) + 1) + positions[fittings.position]


def _ranks(coded: Any) -> Numbers:
    """The rank of each record's code, by the record's number; equal codes (of two types' positions) share one."""
    known = dict(coded)
    ranks = {code: rank for rank, code in enumerate(sorted(set(known.values())))}
    table = np.zeros(max(known, default=0) + 1, dtype=np.int64)
    table[list(known)] = [ranks[code] for code in known.values()]
    return table


def _late(fittings: FittingColumns, prompt: frozenset[int]) -> dict[int, Counter[int]]:
    """How late failures were known at each site that reports at once, among those already read."""
    failures = [REASONS.index(reason) for reason in FAILURE_REASONS]
    counted = np.isin(fittings.reason, failures) & ~fittings.removed_later & among(fittings.site, prompt)
    found: dict[int, Counter[int]] = {}
    width = int(fittings.lag[counted].max(initial=0)) + 1
    pairs = np.bincount(fittings.site[counted] * width + fittings.lag[counted])
    for pair in np.flatnonzero(pairs).tolist():
        found.setdefault(pair // width, Counter())[pair % width] = int(pairs[pair])
    return found


def _stays(as_of: dt.date) -> dict[int, int]:
    """Where each module stood last by the day; a depot only where it stood nowhere else."""
    stays = Placement.objects.standing().filter(from_on__lte=as_of).order_by("from_on", "pk")
    rows = list(stays.values_list("module_id", "site_id", "site__kind"))
    found = {module: site for module, site, kind in rows if kind == SiteKind.DEPOT}
    found.update({module: site for module, site, kind in rows if kind != SiteKind.DEPOT})
    return found
