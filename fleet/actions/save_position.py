"""A position of a module type, new or changed."""

from __future__ import annotations

from typing import Any

from fleet.actions.base import change
from fleet.actions.catalogue import Saving, only
from fleet.actions.errors import BadValue
from fleet.models import Finding, Fitting, Person, Position, Reading
from fleet.rights import CATALOGUE

FIELDS = {"type", "code", "component", "order"}


def save_position(
    *, by: Person | None, position: Position | None = None, version: int | None = None, **fields: Any
) -> Position:
    """A position that records name keeps its type and its component."""
    only(fields, FIELDS, "position")
    with change(by=by, right=CATALOGUE):
        saving = Saving(Position, position, version, fields)
        stored: Position = saving.record
        for name in ("type", "component"):
            if getattr(stored, f"{name}_id") is None:
                raise BadValue(f"The {name} is missing. Choose one.", field=name)
            if not saving.is_new and saving.changes(name) and is_used(stored):
                raise BadValue(
                    f"Records name position {stored.code}, so it keeps its {name}. Add a new position.", field=name
                )
        saving.store()
    return stored


def is_used(position: Position) -> bool:
    return any(model._default_manager.filter(position=position).exists() for model in (Fitting, Finding, Reading))
