"""A part of the catalogue, new or changed."""

from __future__ import annotations

from typing import Any

from fleet.actions.base import change
from fleet.actions.catalogue import Saving, only
from fleet.actions.errors import BadValue
from fleet.models import Fitting, Part, Person
from fleet.rights import CATALOGUE

FIELDS = {
    "code", "component", "revision", "name", "supersedes", "fits_types", "state", "supplier", "unit_cost",
    "lead_time_days", "pack", "minimum",
}  # fmt: skip


def save_part(*, by: Person | None, part: Part | None = None, version: int | None = None, **fields: Any) -> Part:
    """A part that was fitted keeps its component; what it supersedes is of the same one."""
    only(fields, FIELDS, "part")
    with change(by=by, right=CATALOGUE):
        saving = Saving(Part, part, version, fields)
        stored: Part = saving.record
        if stored.component_id is None:
            raise BadValue("The component is missing. Choose one.", field="component")
        if not saving.is_new and saving.changes("component"):
            check_component(stored)
        if saving.changes("supersedes", "component"):
            check_supersedes(stored)
        saving.store()
    return stored


def check_component(part: Part) -> None:
    if Fitting.objects.filter(part=part).exists() or Part.objects.filter(supersedes=part).exists():
        raise BadValue(
            f"Part {part.code} was fitted or superseded, so it keeps its component. Add a new part.", field="component"
        )


def check_supersedes(part: Part) -> None:
    older = part.supersedes
    if older is not None and older.component_id != part.component_id:
        raise BadValue(f"Part {older.code} is of another component. Choose one of the same.", field="supersedes")
    seen = {part.pk}
    while older is not None:
        if older.pk in seen:
            raise BadValue(
                f"{part.supersedes} would in the end supersede itself. Choose an older part.", field="supersedes"
            )
        seen.add(older.pk)
        older = older.supersedes
