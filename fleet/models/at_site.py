"""The gate of records that happened to a module: they belong to the site where it stood at that time."""

from __future__ import annotations

from typing import TYPE_CHECKING

from django.db import models

from fleet.models.mixins import StrikeableQuerySet

if TYPE_CHECKING:
    from fleet.models.person import Person


class AtSiteQuerySet(StrikeableQuerySet):
    """`site` is derived from the placements (made again when these are corrected); empty: no place known."""

    site_path = "site"

    def for_person(self, person: Person) -> AtSiteQuerySet:
        from fleet.models.site import Site

        if person.all_sites and person.role != "bench":
            return self
        return self.filter(**{f"{self.site_path}__in": Site.objects.for_person(person)})


class AtSite(models.Model):
    site = models.ForeignKey(
        "fleet.Site", on_delete=models.PROTECT, null=True, blank=True, editable=False, related_name="+"
    )

    class Meta:
        abstract = True
