"""A module, new, changed or scrapped."""

from __future__ import annotations

import datetime as dt
from typing import Any

from fleet.actions.base import change, sees
from fleet.actions.catalogue import Saving, only
from fleet.actions.checks_places import module_exists_on
from fleet.actions.checks_values import need_day
from fleet.actions.errors import BadValue, NotAllowed
from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.actions.scrap import check_days, scrap
from fleet.actions.writes import add
from fleet.models import Finding, Fitting, Module, Person, Placement, Reading, Site
from fleet.rights import CATALOGUE

FIELDS = {"code", "type", "built_on", "records_from", "scrapped_on"}
MOVE_CLOCKS = ("built_on", "records_from", "scrapped_on")


def save_module(
    *,
    by: Person | None,
    module: Module | None = None,
    version: int | None = None,
    site: Site | None = None,
    from_on: dt.date | None = None,
    bay: str = "",
    **fields: Any,
) -> Module:
    """A new one may be placed at once; a scrapped one leaves its site and its parts count as withdrawn."""
    only(fields, FIELDS, "module")
    if module is not None and site is not None:
        raise BadValue("A module on record moves by a move, not here. Leave the site empty.", field="site")
    with change(by=by, right=CATALOGUE, module=module):
        saving = Saving(Module, module, version, fields)
        stored: Module = saving.record
        check_type(saving, stored)
        check_days(saving, stored)
        saving.store()
        if saving.is_new:
            place_new(stored, site, from_on, bay, by)
        if saving.changes("scrapped_on") and stored.scrapped_on is not None and not saving.is_new:
            scrap(stored, by)
        if saving.is_new or saving.changes(*MOVE_CLOCKS):
            rebuild_clocks([stored.pk])
    return stored


def check_type(saving: Saving, module: Module) -> None:
    if module.type_id is None:
        raise BadValue("The type is missing. Choose one.", field="type")
    if saving.is_new or not saving.changes("type"):
        return
    named = (
        Fitting.objects.filter(module=module),
        Finding.objects.filter(visit__module=module),
        Reading.objects.filter(module=module, position__isnull=False),
    )
    if any(rows.exists() for rows in named):
        raise BadValue(
            f"Records name positions of {module.code}, so it keeps its type. Enter it as a new module.", field="type"
        )


def place_new(module: Module, site: Site | None, from_on: dt.date | None, bay: str, by: Person | None) -> None:
    if site is None:
        if by is not None and not by.all_sites:
            raise BadValue("Without a site you would not see this module. Choose where it stands.", field="site")
        return
    if by is not None and not sees(by, site):
        raise NotAllowed(f"Site {site.code} is none of yours. Choose a site of yours.", field="site")
    day = need_day(from_on, field="from_on")
    module_exists_on(module, day, field="from_on")
    add(Placement(module=module, site=site, from_on=day, bay=bay))
