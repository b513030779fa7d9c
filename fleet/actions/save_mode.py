"""A failure mode of a component, new or changed."""

from __future__ import annotations

from typing import Any

from fleet.actions.base import change
from fleet.actions.catalogue import Saving, only
from fleet.actions.errors import BadValue
from fleet.models import FailureMode, Finding, Fitting, Person
from fleet.rights import CATALOGUE

FIELDS = {"component", "code", "name", "mechanism", "cause", "goes_to_bench"}


def save_mode(
    *, by: Person | None, mode: FailureMode | None = None, version: int | None = None, **fields: Any
) -> FailureMode:
    """A mode that records name stays with its component."""
    only(fields, FIELDS, "failure mode")
    with change(by=by, right=CATALOGUE):
        saving = Saving(FailureMode, mode, version, fields)
        stored: FailureMode = saving.record
        if saving.is_new and stored.component_id is None:
            raise BadValue("The component is missing. Choose one.", field="component")
        if not saving.is_new and saving.changes("component") and is_used(stored):
            raise BadValue(
                f"Records name failure mode {stored.code}, so it stays with its component. Add a new mode.",
                field="component",
            )
        saving.store()
    return stored


def is_used(mode: FailureMode) -> bool:
    return Fitting.objects.filter(mode=mode).exists() or Finding.objects.filter(mode=mode).exists()
