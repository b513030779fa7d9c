"""A question about lives with the names in it turned into records, or refused with the names that there are."""

from __future__ import annotations

import datetime as dt
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from django.db import connection, models
from django.utils import timezone

from fleet.models import Component, FailureMode, ModuleType, Part, Site
from reliability.life_errors import NothingNamed, NotYet
from reliability.life_sql import ALSO_COLUMNS, LifeQuestion

CLOCKS = ("days", "hours", "strokes")
GROUPINGS = ("part", "site", "type", "lot", "quarter")
ALSO = tuple(name for name in ALSO_COLUMNS if name is not None)
EARLIEST_ZONE = dt.timedelta(hours=14)  # where a day begins first


@dataclass(frozen=True)
class Asked:
    """The choices of a question, with names turned into records."""

    component: Component
    clock: str
    by: str | None
    also: str | None
    as_of: dt.date
    known_on: dt.date | None
    sites: tuple[int, ...] | None
    parts: tuple[int, ...] | None
    types: tuple[int, ...] | None
    modes: tuple[int, ...] | None
    mode_codes: tuple[str, ...]
    with_rigs: bool
    worn_is_failure: bool


def asked_of(
    component: Component | str,
    *,
    clock: str | None = None,
    by: str | None = None,
    also: str | None = None,
    sites: Sequence[Any] | None = None,
    parts: Sequence[Any] | None = None,
    types: Sequence[Any] | None = None,
    modes: Sequence[Any] | None = None,
    as_of: dt.date | None = None,
    known_on: dt.date | None = None,
    with_rigs: bool = False,
    worn_is_failure: bool = True,
) -> Asked:
    found = component_of(component)
    return Asked(
        component=found,
        clock=_one_of(clock or found.clock, CLOCKS, "clock"),
        by=None if by is None else _one_of(by, GROUPINGS, "grouping"),
        also=None if also is None else _one_of(also, ALSO, "label"),
        as_of=_come(as_of or timezone.localdate()),
        known_on=known_on,
        sites=keys_of(Site, sites, "site"),
        parts=keys_of(Part, parts, "part", component=found),
        types=keys_of(ModuleType, types, "module type"),
        modes=keys_of(FailureMode, modes, "failure mode", component=found),
        mode_codes=tuple(_code(mode) for mode in modes or ()),
        with_rigs=with_rigs,
        worn_is_failure=worn_is_failure,
    )


def life_question(asked: Asked, lags: dict[int, int], starts: dict[int, int] | None = None) -> LifeQuestion:
    """The same in the database's own numbers; `starts` gives sites a day before which nothing there is looked at."""
    year, year_parameters = connection.ops.date_extract_sql("year", "f.fitted_on", ())
    quarter, quarter_parameters = connection.ops.date_extract_sql("quarter", "f.fitted_on", ())
    return LifeQuestion(
        component=asked.component.pk,
        clock=asked.clock,
        own_clock=asked.clock == asked.component.clock,
        as_of=asked.as_of.toordinal(),
        as_of_text=asked.as_of.isoformat(),
        by=asked.by,
        also=asked.also,
        sites=asked.sites,
        parts=asked.parts,
        types=asked.types,
        modes=asked.modes,
        with_rigs=asked.with_rigs,
        worn_is_failure=asked.worn_is_failure,
        lags=lags,
        starts=starts or {},
        quarter=f"({year}) * 10 + ({quarter})",
        quarter_parameters=(*year_parameters, *quarter_parameters),
    )


def component_of(component: Component | str) -> Component:
    if isinstance(component, Component):
        return component
    found = Component.objects.filter(code=component).first()
    if found is None:
        raise NothingNamed("component", component, Component.objects.values_list("code", flat=True))
    return found


def titles_of_modes(component: Component | str) -> dict[str, str]:
    """What people call the failure modes of a component, by code."""
    return {mode.code: mode.title for mode in FailureMode.objects.filter(component=component_of(component))}


def keys_of(
    model: type[models.Model], chosen: Sequence[Any] | None, noun: str, **limits: Any
) -> tuple[int, ...] | None:
    """Primary keys of records named by code or given as records; None: no restriction."""
    if chosen is None:
        return None
    known = dict(model._default_manager.filter(**limits).values_list("code", "pk"))
    codes = [_code(item) for item in chosen]
    for code in codes:
        if code not in known:
            raise NothingNamed(noun, code, known)
    return tuple(known[code] for code in codes)


def _come(day: dt.date) -> dt.date:
    if day > (timezone.now() + EARLIEST_ZONE).date():
        raise NotYet(day)
    return day


def _code(item: Any) -> str:
    return str(getattr(item, "code", item)).strip().upper()


def _one_of(value: str, choices: Sequence[str], noun: str) -> str:
    if value not in choices:
        raise NothingNamed(noun, value, choices)
    return value
