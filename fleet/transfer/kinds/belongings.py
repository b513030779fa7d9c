"""Checks that the files of a module's own records share."""

from __future__ import annotations

import datetime as dt

from fleet.transfer.known import UNCLEAR, Known, KnownModule, KnownVisit
from fleet.transfer.row import Row


def module_of(row: Row, known: Known) -> KnownModule | None:
    """The module that the row names; the unknown one was reported when its cell was read."""
    code = row.given.get("module", "").upper()
    return known.modules.get(code) if row.get("module_id") is not None else None


def check_module_days(row: Row, column: str, day: dt.date | None, module: KnownModule | None) -> None:
    """Nothing happens to a module before it was built or after it was scrapped."""
    if day is None or module is None:
        return
    if module.built_on is not None and day < module.built_on:
        row.say(column, f"lies before the module was built, {module.built_on.isoformat()}. Enter a day from then on.")
    if module.scrapped_on is not None and day > module.scrapped_on:
        row.say(
            column, f"lies after the module was scrapped, {module.scrapped_on.isoformat()}. Enter a day up to then."
        )


def settle_known_on(row: Row, known: Known, column: str, to: str, happened_on: dt.date | None) -> None:
    """Empty means the day it happened; never before that day, never in the future."""
    if row[to] is None:
        row[to] = happened_on
        return
    known.check_past(row, column, to, row.get("module_id"))
    row.not_before(column, to, happened_on, "the day it happened")


def settle_visit(
    row: Row, known: Known, column: str, to: str, module: int | None, day: dt.date | None = None
) -> KnownVisit | None:
    """From the visit's code to the visit; it must be the module's own, stand, and be of the day."""
    code = row.values.pop(f"{to.removesuffix('_id')}_code", None)
    row[to] = None
    if code is None:
        return None
    visit = known.visits.get(code)
    if visit is None:
        row.say(column, "is neither in visits.csv nor in the book. Add the visit, or leave it empty.")
        return None
    row[to] = visit.id
    if row.get("struck_out"):
        return visit
    if visit.struck_out:
        row.say(column, "was struck out. Name another visit, or leave it empty.")
    elif module is not None and visit.module != module:
        row.say(column, "was to another module. Name one of this module, or leave it empty.")
    elif day is not None and visit.happened_on != day:
        row.say(column, f"was on {visit.happened_on.isoformat()}. Name the visit of the day, or leave it empty.")
    return visit


def settle_position(row: Row, known: Known, module: KnownModule | None) -> int | None:
    """From the position's code to the position of the module's type; returns its component."""
    code = row.values.pop("position_code", None)
    row["position_id"] = None
    if code is None or module is None or module.type == UNCLEAR:
        return None
    position = known.positions.get((module.type, code))
    if position is None:
        row.say("position", "is no position of this module's type. Add it to positions.csv, or correct the code.")
        return None
    row["position_id"] = position.id
    return position.component


def settle_mode(row: Row, known: Known, component: int | None) -> None:
    code = row.values.pop("mode_code", None)
    row["mode_id"] = None
    if code is None or component is None or component == UNCLEAR:
        return
    row["mode_id"] = known.modes.get((component, code))
    if row["mode_id"] is None:
        row.say("mode", "is no failure mode of this component. Add it to modes.csv, or correct the code.")
