"""The rework bench: modules on it, hours booked, and hours that there are."""

from __future__ import annotations

from typing import TYPE_CHECKING

from django.conf import settings
from django.core.validators import MaxValueValidator, MinValueValidator
from django.db import models
from django.db.models import F, Q

from fleet.history import kept_history
from fleet.models.codes import Coded
from fleet.models.mixins import Entered, Strikeable, StrikeableQuerySet, Versioned
from fleet.models.module import Module
from fleet.models.part import Part
from fleet.models.site import Site

if TYPE_CHECKING:
    from fleet.models.person import Person

MOST_HOURS_A_WEEK = 10_000


class Stage(models.TextChoices):
    RECEIVED = "received"
    WAITING = "waiting"
    ON_THE_BENCH = "on the bench"
    WAITING_FOR_PARTS = "waiting for parts"
    FINISHED = "finished"


class Outcome(models.TextChoices):
    READY = "ready"
    SCRAPPED = "scrapped"
    WITHDRAWN = "withdrawn"


class BenchJobQuerySet(StrikeableQuerySet):
    def for_person(self, person: Person) -> BenchJobQuerySet:
        if person.all_sites and person.role != "bench":
            return self
        return self.filter(depot__in=Site.objects.for_person(person).values("pk"))

    def open(self) -> BenchJobQuerySet:
        return self.filter(finished_on=None, struck_out="")


class BenchJob(Coded, Versioned, Strikeable, Entered):
    """One module's pass over the bench, during a placement at a depot. The parts in it do not age meanwhile."""

    module = models.ForeignKey(Module, on_delete=models.PROTECT, related_name="jobs")
    depot = models.ForeignKey(Site, on_delete=models.PROTECT, related_name="jobs")
    reason = models.CharField(max_length=500, blank=True, default="")
    received_on = models.DateField()
    stage = models.CharField(max_length=17, choices=Stage.choices, default=Stage.RECEIVED)
    started_on = models.DateField(null=True, blank=True)
    finished_on = models.DateField(null=True, blank=True)
    outcome = models.CharField(max_length=9, choices=Outcome.choices, blank=True, default="")
    waits_for = models.ForeignKey(Part, on_delete=models.PROTECT, null=True, blank=True, related_name="waiting_jobs")
    note = models.TextField(blank=True, default="", max_length=4000)
    history = kept_history()

    objects = BenchJobQuerySet.as_manager()

    class Meta:
        ordering = ["received_on", "id"]
        indexes = [
            models.Index(fields=["module", "received_on"]),
            models.Index(fields=["depot", "finished_on"]),
            models.Index(fields=["finished_on"]),
        ]
        constraints = [
            models.UniqueConstraint(
                fields=["module"], condition=Q(finished_on=None, struck_out=""), name="one_open_job_a_module"
            ),
            models.CheckConstraint(
                condition=(Q(finished_on=None) & Q(outcome="") & ~Q(stage=Stage.FINISHED))
                | (Q(finished_on__isnull=False) & ~Q(outcome="") & Q(stage=Stage.FINISHED)),
                name="finished_job_has_outcome",
            ),
            models.CheckConstraint(
                condition=(Q(started_on=None) | Q(started_on__gte=F("received_on")))
                & (Q(finished_on=None) | Q(finished_on__gte=F("received_on")))
                & (Q(started_on=None) | Q(finished_on=None) | Q(finished_on__gte=F("started_on"))),
                name="job_in_order",
            ),
        ]


class BenchHoursQuerySet(StrikeableQuerySet):
    def for_person(self, person: Person) -> BenchHoursQuerySet:
        return self.filter(job__in=BenchJob.objects.for_person(person).values("pk"))


class BenchHours(Versioned, Strikeable, Entered):
    """What one person worked on one job on one day."""

    job = models.ForeignKey(BenchJob, on_delete=models.PROTECT, related_name="hours")
    person = models.ForeignKey(settings.AUTH_USER_MODEL, on_delete=models.PROTECT, related_name="bench_hours")
    day = models.DateField()
    hours = models.FloatField(validators=[MinValueValidator(0), MaxValueValidator(24)])
    history = kept_history()

    objects = BenchHoursQuerySet.as_manager()

    class Meta:
        ordering = ["day", "id"]
        indexes = [models.Index(fields=["day"]), models.Index(fields=["person", "day"])]
        constraints = [
            models.UniqueConstraint(
                fields=["job", "person", "day"], condition=Q(struck_out=""), name="hours_once_a_job_person_and_day"
            )
        ]

    def __str__(self) -> str:
        return f"{self.hours:g} h on {self.job}, {self.day:%Y-%m-%d}"


class BenchCapacityQuerySet(models.QuerySet):
    def for_person(self, person: Person) -> BenchCapacityQuerySet:
        from fleet.rights import BENCH, may

        return self if may(person, BENCH) else self.none()


class BenchCapacity(Versioned):
    """Hours that the bench has in a week, closed days taken off already."""

    week = models.DateField(unique=True)  # its Monday
    hours = models.FloatField(validators=[MinValueValidator(0), MaxValueValidator(MOST_HOURS_A_WEEK)])
    note = models.CharField(max_length=200, blank=True, default="")
    history = kept_history()

    objects = BenchCapacityQuerySet.as_manager()

    class Meta:
        ordering = ["week"]

    def __str__(self) -> str:
        return f"{self.hours:g} h in the week of {self.week:%Y-%m-%d}"
