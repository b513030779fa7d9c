"""A component, new or changed."""

from __future__ import annotations

from typing import Any

from fleet.actions.base import change
from fleet.actions.catalogue import Saving, only
from fleet.actions.errors import BadValue
from fleet.models import Component, Fitting, Person
from fleet.rights import CATALOGUE

FIELDS = {"code", "name", "clock"}


def save_component(
    *, by: Person | None, component: Component | None = None, version: int | None = None, **fields: Any
) -> Component:
    """Its clock may change as long as no used part carries an age on it."""
    only(fields, FIELDS, "component")
    with change(by=by, right=CATALOGUE):
        saving = Saving(Component, component, version, fields)
        stored: Component = saving.record
        if not saving.is_new and saving.changes("clock"):
            aged = Fitting.objects.standing().filter(position__component=stored, age_at_fit__gt=0)
            if aged.exists():
                raise BadValue(
                    f"Used parts of {stored.code} carry ages in {saving.before['clock']}. "
                    "Correct those fittings first.",
                    field="clock",
                )
        saving.store()
    return stored
