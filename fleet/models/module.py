"""Built units and their stays at sites."""

from __future__ import annotations

import datetime as dt
from typing import Any

from django.db import models
from django.db.models import Exists, F, OuterRef, Q, Subquery

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

    def with_state(self) -> ModuleQuerySet:
        """Adds the stay now (`now_site_id`, `now_site_code` …) and what `Module.state` is read from."""
        from fleet.models.stop import Stop

        stay = Placement.objects.current().filter(module=OuterRef("pk"))
        return self.annotate(
            now_site_id=Subquery(stay.values("site_id")[:1]),
            now_site_code=Subquery(stay.values("site__code")[:1]),
            now_site_name=Subquery(stay.values("site__name")[:1]),
            now_site_kind=Subquery(stay.values("site__kind")[:1]),
            now_bay=Subquery(stay.values("bay")[:1]),
            was_placed=Exists(Placement.objects.standing().filter(module=OuterRef("pk"))),
            is_stopped=Exists(Stop.objects.now().filter(module=OuterRef("pk"))),
            stopped_since=Subquery(Stop.objects.now().filter(module=OuterRef("pk")).values("stopped_at")[:1]),
        )

    def in_state(self, state: str) -> ModuleQuerySet:
        """Of rows `with_state`: running, stopped, at a depot, without a place, scrapped."""
        if state == ModuleState.SCRAPPED:
            return self.filter(scrapped_on__isnull=False)
        kept = self.filter(scrapped_on=None)
        if state == ModuleState.AT_DEPOT:
            return kept.filter(now_site_kind="depot")
        if state == ModuleState.NO_PLACE:
            return kept.filter(now_site_id=None, was_placed=True)
        in_service = kept.filter(Q(now_site_kind__in=["field", "rig"]) | Q(now_site_id=None, was_placed=False))
        return in_service.filter(is_stopped=state == ModuleState.STOPPED)


class ModuleState(models.TextChoices):
    """A module without any stay on record counts as in service."""

    RUNNING = "running"
    STOPPED = "stopped"
    AT_DEPOT = "at a depot"
    NO_PLACE = "without a place"
    SCRAPPED = "scrapped"


class Module(Coded, Versioned):
    """One built unit; its code is the tag on its label."""

    type = models.ForeignKey(ModuleType, on_delete=models.PROTECT, related_name="modules")
    built_on = models.DateField(null=True, blank=True)
    records_from = models.DateField(null=True, blank=True)
    scrapped_on = models.DateField(null=True, blank=True)
    history = kept_history()

    objects = ModuleQuerySet.as_manager()

    @property
    def state(self) -> str:
        """Of a row read `with_state`."""
        row: Any = self
        if self.scrapped_on is not None:
            return ModuleState.SCRAPPED
        if row.now_site_kind == "depot":
            return ModuleState.AT_DEPOT
        if row.now_site_id is None and row.was_placed:
            return ModuleState.NO_PLACE
        return ModuleState.STOPPED if row.is_stopped else ModuleState.RUNNING


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
