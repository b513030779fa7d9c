"""The gate of the catalogue: everybody who is signed in sees it (costs are hidden by the screens)."""

from __future__ import annotations

from typing import TYPE_CHECKING

from django.db import models

if TYPE_CHECKING:
    from fleet.models.person import Person


class OpenQuerySet(models.QuerySet):
    def for_person(self, person: Person) -> OpenQuerySet:
        return self if person.is_active else self.none()
