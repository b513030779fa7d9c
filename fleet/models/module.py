"""Built units and their stays at sites."""

from __future__ import annotations

import datetime as dt

from django.db import models
from django.db.models import Exists, F, OuterRef, Q

from fleet.history import kept_history
from fleet.models.codes import Coded
from fleet.models.exclusion import NoOverlap
from fleet.models.mixins import Strikeable, StrikeableQuerySet, Versioned
from fleet.models.module_type import ModuleType
from fleet.models.person import Person
from fleet.models.site import Site


class ModuleQuerySet(models.QuerySet):
    def for_person(self, person: Person) -> ModuleQuerySet:
        """Modules standing now at a site of theirs; modules without a place only for those who see all sites."""
        if person.all_sites and person.role != "bench":
            return self
        here = Placement.objects.current().filter(module=OuterRef("pk"), site__in=Site.objects.for_person(person))
        return self.filter(Exists(here))

    def with_place(self) -> ModuleQuerySet:
        """Adds `site_id`, `site_code`, `site_name` and `bay` of the stay now."""
        stay = Placement.objects.current().filter(module=OuterRef("pk"))
        return self.annotate(
            now_site_id=models.Subquery(stay.values("site_id")[:1]),
            now_site_code=models.Subquery(stay.values("site__code")[:1]),
            now_site_name=models.Subquery(stay.values("site__name")[:1]),
            now_bay=models.Subquery(stay.values("bay")[:1]),
        )


class Module(Coded, Versioned):
    """One built unit; its code is the tag on its label."""

    type = models.ForeignKey(ModuleType, on_delete=models.PROTECT, related_name="modules")
    built_on = models.DateField(null=True, blank=True)
    records_from = models.DateField(null=True, blank=True)
    scrapped_on = models.DateField(null=True, blank=True)
    history = kept_history()

    objects = ModuleQuerySet.as_manager()


class PlacementQuerySet(StrikeableQuerySet):
    def for_person(self, person: Person) -> PlacementQuerySet:
        if person.all_sites and person.role != "bench":
            return self
        return self.filter(site__in=Site.objects.for_person(person))

    def current(self) -> PlacementQuerySet:
        return self.filter(to_on=None, struck_out="")

    def on(self, day: dt.date) -> PlacementQuerySet:
        return self.standing().filter(Q(to_on=None) | Q(to_on__gt=day), from_on__lte=day)


class Placement(Versioned, Strikeable):
    """A module's stay at a site: from a day on, until a day (that day no more)."""

    module = models.ForeignKey(Module, on_delete=models.PROTECT, related_name="placements")
    site = models.ForeignKey(Site, on_delete=models.PROTECT, related_name="placements")
    bay = models.CharField(max_length=40, blank=True, default="")
    from_on = models.DateField()
    to_on = models.DateField(null=True, blank=True)
    history = kept_history()

    objects = PlacementQuerySet.as_manager()

    class Meta:
        ordering = ["module", "from_on", "id"]
        indexes = [models.Index(fields=["module", "from_on"]), models.Index(fields=["site", "to_on"])]
        constraints = [
            models.CheckConstraint(condition=Q(to_on=None) | Q(to_on__gte=F("from_on")), name="placement_in_order"),
            models.UniqueConstraint(
                fields=["module"], condition=Q(to_on=None, struck_out=""), name="module_in_one_place_now"
            ),
            NoOverlap("placement_no_overlap", same=["module"], start="from_on", end="to_on"),
        ]

    def __str__(self) -> str:
        return f"{self.module} at {self.site} from {self.from_on}"
