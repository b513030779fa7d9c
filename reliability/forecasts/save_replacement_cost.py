"""What a planned replacement and a failure of a component cost."""

from __future__ import annotations

from typing import Any

from fleet.actions.base import change, require
from fleet.actions.catalogue import Saving, only
from fleet.actions.errors import BadValue
from fleet.models import Component, Person
from fleet.rights import COSTS, LIFE
from reliability.models import ReplacementCost

FIELDS = {"planned_cost", "failure_cost", "visit_every_days"}


def save_replacement_cost(
    *, by: Person, component: Component, version: int | None = None, **fields: Any
) -> ReplacementCost:
    """The first entry makes the row; a later one changes it, with its history."""
    only(fields, FIELDS, "cost of a replacement")
    with change(by=by, right=LIFE, raises_version=False):
        require(by, COSTS)
        Component.objects.select_for_update(of=("self",), no_key=True).get(pk=component.pk)
        record = ReplacementCost.objects.filter(component=component).first()
        if record is None and version is not None:
            raise BadValue("These costs were taken away meanwhile. Open the page again.", field="version")
        if record is not None and version is None:
            raise BadValue("Somebody entered these costs at the same moment. Open the page again.", field="version")
        values = fields if record is not None else {**fields, "component": component}
        saving = Saving(ReplacementCost, record, version, values)
        saving.store()
    stored: ReplacementCost = saving.record
    return stored
