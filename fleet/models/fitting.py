"""One part's stay in a position: the unit of life data."""

from __future__ import annotations

import datetime as dt
from typing import TYPE_CHECKING

from django.core.validators import MinValueValidator
from django.db import models
from django.db.models import Exists, F, OuterRef, Q, Value
from django.db.models.functions import Coalesce

from fleet.history import kept_history
from fleet.models.bench import BenchJob
from fleet.models.codes import Coded
from fleet.models.component import FailureMode
from fleet.models.exclusion import NoOverlap
from fleet.models.mixins import Entered, Strikeable, StrikeableQuerySet, Versioned
from fleet.models.module import Module, Placement
from fleet.models.module_type import Position
from fleet.models.part import Part
from fleet.models.visit import Visit

if TYPE_CHECKING:
    from fleet.models.person import Person


class RemovalReason(models.TextChoices):
    FAILED = "failed"
    WORN_TO_LIMIT = "worn to limit"
    PLANNED = "planned"
    TAKEN_WITH_ANOTHER = "taken with another"
    UPGRADE = "upgrade"
    MODULE_WITHDRAWN = "module withdrawn"
    NOT_KNOWN = "not known"


FAILURE_REASONS = [RemovalReason.FAILED, RemovalReason.WORN_TO_LIMIT]


class FoundBy(models.TextChoices):
    """How a failure came to light (ISO 14224: detection method)."""

    PLANNED_VISIT = "planned visit"
    INSPECTION = "inspection"
    TEST = "test"
    MONITORING = "monitoring"
    BY_CHANCE = "by chance"
    WHEN_NEEDED = "when needed"
    OTHER = "other"


class FittingQuerySet(StrikeableQuerySet):
    def for_person(self, person: Person) -> FittingQuerySet:
        """Fittings whose stay touches a stay of the module at a site of theirs."""
        from fleet.models.site import Site

        if person.all_sites and person.role != "bench":
            return self
        begun = Coalesce(OuterRef("fitted_on"), Value(dt.date.min))
        ended = Coalesce(OuterRef("removed_on"), Value(dt.date.max))
        touching = Placement.objects.standing().filter(
            Q(to_on=None) | Q(to_on__gte=begun),
            from_on__lte=ended,
            module=OuterRef("module_id"),
            site__in=Site.objects.for_person(person),
        )
        return self.filter(Exists(touching))

    def running(self) -> FittingQuerySet:
        return self.filter(removed_on=None, struck_out="")


class Fitting(Coded, Versioned, Strikeable, Entered):
    """Fitted on a day, then removed on a day for a reason; a life ends at `failed_on`, else at `removed_on`."""

    module = models.ForeignKey(Module, on_delete=models.PROTECT, related_name="fittings")
    position = models.ForeignKey(Position, on_delete=models.PROTECT, related_name="fittings")
    part = models.ForeignKey(Part, on_delete=models.PROTECT, related_name="fittings")
    serial = models.CharField(max_length=60, blank=True, default="")
    lot = models.CharField(max_length=60, blank=True, default="")
    fitted_on = models.DateField(null=True, blank=True)  # empty: fitted before anybody wrote it down
    age_at_fit = models.FloatField(default=0, validators=[MinValueValidator(0)])  # on the component's clock
    strokes_at_fit = models.BigIntegerField(null=True, blank=True, validators=[MinValueValidator(0)])  # measured
    hours_at_fit = models.FloatField(null=True, blank=True, validators=[MinValueValidator(0)])  # measured
    fitted_visit = models.ForeignKey(Visit, on_delete=models.PROTECT, null=True, blank=True, related_name="fitted")
    fitted_known_on = models.DateField(null=True, blank=True)
    failed_on = models.DateField(null=True, blank=True)
    removed_on = models.DateField(null=True, blank=True)
    strokes_at_removal = models.BigIntegerField(null=True, blank=True, validators=[MinValueValidator(0)])
    hours_at_removal = models.FloatField(null=True, blank=True, validators=[MinValueValidator(0)])
    reason = models.CharField(max_length=18, choices=RemovalReason.choices, blank=True, default="")
    mode = models.ForeignKey(FailureMode, on_delete=models.PROTECT, null=True, blank=True, related_name="fittings")
    found_by = models.CharField(max_length=13, choices=FoundBy.choices, blank=True, default="")
    last_good_on = models.DateField(null=True, blank=True)
    caused_by = models.ForeignKey("self", on_delete=models.PROTECT, null=True, blank=True, related_name="took_along")
    removed_visit = models.ForeignKey(Visit, on_delete=models.PROTECT, null=True, blank=True, related_name="removed")
    removed_known_on = models.DateField(null=True, blank=True)
    # The bench job during which it came out or, where it did not, went in.
    job = models.ForeignKey(BenchJob, on_delete=models.PROTECT, null=True, blank=True, related_name="fittings")
    note = models.TextField(blank=True, default="", max_length=4000)
    history = kept_history()

    objects = FittingQuerySet.as_manager()

    class Meta:
        ordering = ["module", "position", "fitted_on", "id"]
        indexes = [
            models.Index(fields=["module", "position", "fitted_on"]),
            models.Index(fields=["part", "removed_on"]),
            models.Index(fields=["failed_on"]),
            models.Index(fields=["removed_on"]),
        ]
        constraints = [
            models.UniqueConstraint(
                fields=["module", "position"],
                condition=Q(removed_on=None, struck_out=""),
                name="one_part_in_a_position",
            ),
            models.CheckConstraint(
                condition=Q(removed_on=None) | Q(fitted_on=None) | Q(removed_on__gte=F("fitted_on")),
                name="fitting_in_order",
            ),
            models.CheckConstraint(
                condition=Q(failed_on=None)
                | (Q(removed_on__gte=F("failed_on")) & (Q(fitted_on=None) | Q(failed_on__gte=F("fitted_on")))),
                name="failure_within_stay",
            ),
            models.CheckConstraint(
                condition=(Q(removed_on=None) & Q(reason="")) | (Q(removed_on__isnull=False) & ~Q(reason="")),
                name="removal_has_reason",
            ),
            NoOverlap("fitting_no_overlap", same=["module", "position"], start="fitted_on", end="removed_on"),
        ]
