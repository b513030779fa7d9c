"""A line of a supply order is changed, or what is still to come of it is called off."""

from __future__ import annotations

from typing import Any

from fleet.actions.base import change
from fleet.actions.catalogue import clean_field, only
from fleet.actions.changed_since import check_version
from fleet.actions.correct_record import clean_reason
from fleet.actions.errors import AlreadyDone, BadValue
from fleet.actions.place_supply_order import check_due
from fleet.actions.strike import strike
from fleet.actions.writes import save_again
from fleet.models import Person, SupplyLine
from fleet.rights import STOCK

FIELDS = {"quantity", "due_on", "unit_cost"}


def change_supply_line(
    *, by: Person | None, line: SupplyLine, version: int | None = None, reason: str = "", **fields: Any
) -> SupplyLine:
    """Never fewer than came already. The reason is kept with the change where one is given."""
    only(fields, FIELDS, "line")
    with change(by=by, right=STOCK, reason=reason, raises_version=False):
        line = standing_line(line)
        given = {name: clean_field(SupplyLine, name, value) for name, value in fields.items()}
        changed = {name: value for name, value in given.items() if value != getattr(line, name)}
        if not changed:
            return line
        check_version(line, version)
        for name, value in changed.items():
            setattr(line, name, value)
        check_due(line, line.order)
        came = received(line)
        if isinstance(line.quantity, int) and line.quantity < came:
            raise BadValue(
                f"{came} of {line.part.code} came already. Enter at least so many, or strike a receipt out first.",
                field="quantity",
            )
        save_again(line, set(changed))
    return line


def cancel_supply_line(*, by: Person | None, line: SupplyLine, reason: str, version: int | None = None) -> SupplyLine:
    """Nothing more comes: the line is cut to what came, or struck out where nothing did."""
    reason = clean_reason(reason)
    with change(by=by, right=STOCK, reason=reason, raises_version=False):
        line = standing_line(line)
        check_version(line, version)
        came = received(line)
        if came >= line.quantity:
            raise AlreadyDone(f"All {came} of {line.part.code} came already. Nothing is left to call off.")
        if came == 0:
            return strike(line, by, reason)
        line.quantity = came
        save_again(line, {"quantity"})
    return line


def standing_line(line: SupplyLine) -> SupplyLine:
    """Under its lock, so that no delivery comes between."""
    locked = SupplyLine.objects.select_for_update(of=("self",), no_key=True).get(pk=line.pk)
    if locked.struck_out:
        raise AlreadyDone(f"{locked.part.code} was taken off order {locked.order.code}: {locked.struck_out}.")
    return locked


def received(line: SupplyLine) -> int:
    return int(SupplyLine.objects.with_received().get(pk=line.pk).received)
