"""A module type, new or changed."""

from __future__ import annotations

from typing import Any

from fleet.actions.base import change
from fleet.actions.catalogue import Saving, only
from fleet.models import ModuleType, Person
from fleet.rights import CATALOGUE

FIELDS = {"code", "name", "cautions"}


def save_type(
    *, by: Person | None, type: ModuleType | None = None, version: int | None = None, **fields: Any
) -> ModuleType:
    only(fields, FIELDS, "module type")
    with change(by=by, right=CATALOGUE):
        stored: ModuleType = Saving(ModuleType, type, version, fields).store()
    return stored
