"""One correction under way: the record under its module's lock, and the cleaned values to put in."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

from fleet.actions.checks_places import Places
from fleet.models import Module, Person


@dataclass
class Correction:
    record: Any
    changes: dict[str, Any]
    module: Module
    by: Person | None
    reason: str
    places: Places = field(init=False)

    def __post_init__(self) -> None:
        self.places = Places(self.module)

    def names(self, *fields: str) -> bool:
        """Whether any of these fields changes."""
        return any(name in self.changes for name in fields)

    def put(self, *left_out: str) -> None:
        for name, value in self.changes.items():
            if name not in left_out:
                setattr(self.record, name, value)
