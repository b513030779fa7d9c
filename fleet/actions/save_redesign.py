"""A redesign, new or changed: what it replaces by what, its hope and its costs."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from fleet.actions.base import change
from fleet.actions.catalogue import Saving, only
from fleet.actions.changed_since import check_version
from fleet.actions.errors import BadValue
from fleet.actions.writes import save_again
from fleet.models import Part, Person, Redesign, RedesignChange
from fleet.rights import LIFE

FIELDS = {
    "code", "name", "hope", "starts_on", "cost_a_module", "visits_a_failure", "bench_hours_a_failure",
    "stop_days_a_failure", "note",
}  # fmt: skip


@dataclass(frozen=True)
class PartReplaced:
    """One component's side: the new part and the parts whose place it takes."""

    new_part: Part
    replaces: Sequence[Part]


def save_redesign(
    *,
    by: Person | None,
    redesign: Redesign | None = None,
    version: int | None = None,
    changes: Sequence[PartReplaced] | None = None,
    **fields: Any,
) -> Redesign:
    """`changes` left out keeps them as they are; a new redesign needs at least one."""
    only(fields, FIELDS, "redesign")
    with change(by=by, right=LIFE):
        saving = Saving(Redesign, redesign, version, fields)
        if saving.is_new and not changes:
            raise BadValue("The new part is missing. Choose at least one.", field="new_parts")
        for each in changes or ():
            check_replaced(each)
        check_once_a_component(changes or ())
        stored: Redesign = saving.store()
        if changes is not None:
            store_changes(stored, changes, version, counted=saving.is_new or saving.changes_anything)
    return stored


def check_replaced(each: PartReplaced) -> None:
    new = each.new_part
    if not each.replaces:
        raise BadValue(f"What {new.code} replaces is missing. Choose the older parts.", field="replaced")
    for old in each.replaces:
        if old.pk == new.pk:
            raise BadValue(f"{new.code} cannot replace itself. Choose older parts.", field="replaced")
        if old.component_id != new.component_id:
            raise BadValue(
                f"{old.code} is a {old.component.title}, {new.code} a {new.component.title}. "
                "Choose parts of the same component.",
                field="replaced",
            )


def check_once_a_component(changes: Sequence[PartReplaced]) -> None:
    seen: dict[int, Part] = {}
    for each in changes:
        other = seen.setdefault(each.new_part.component_id, each.new_part)
        if other is not each.new_part:
            raise BadValue(
                f"{other.code} and {each.new_part.code} are both for the {each.new_part.component.title}. "
                "Make a redesign of each, and compare them on its page.",
                field="new_parts",
            )


def store_changes(redesign: Redesign, changes: Sequence[PartReplaced], version: int | None, *, counted: bool) -> None:
    """Lines that stay are kept; those no longer named go, and their history stays."""
    now = {line.new_part_id: line for line in redesign.changes.all()}
    wanted = {each.new_part.pk: {part.pk for part in each.replaces} for each in changes}
    before = {key: set(line.replaces.values_list("pk", flat=True)) for key, line in now.items()}
    if before == wanted:
        return
    if not counted:
        check_version(redesign, version)
        save_again(redesign, set())
    for key, line in now.items():
        if key not in wanted:
            line.replaces.clear()
            line.delete()
    for each in changes:
        line = now.get(each.new_part.pk) or RedesignChange.objects.create(redesign=redesign, new_part=each.new_part)
        if before.get(each.new_part.pk) != wanted[each.new_part.pk]:
            line.replaces.set(each.replaces)
