"""Places where modules stand."""

from __future__ import annotations

import datetime as dt
from typing import Any
from zoneinfo import ZoneInfo

from django.core.validators import MaxValueValidator, MinValueValidator
from django.db import models

from fleet.history import kept_history
from fleet.models.codes import Coded
from fleet.models.mixins import Versioned, fold
from fleet.models.person import Person, Role
from fleet.models.zones import validate_zone, zone


class SiteKind(models.TextChoices):
    FIELD = "field"
    RIG = "rig"
    DEPOT = "depot"


class SiteQuerySet(models.QuerySet):
    def for_person(self, person: Person) -> SiteQuerySet:
        sites = (
            self
            if person.all_sites
            else self.filter(pk__in=person.sites.through.objects.filter(person=person).values("site"))
        )
        return sites.filter(kind=SiteKind.DEPOT) if person.role == Role.BENCH else sites


class Site(Coded, Versioned):
    """A place where modules stand: in the field, on a test stand, or at a depot."""

    name = models.CharField(max_length=120, blank=True, default="")
    kind = models.CharField(max_length=5, choices=SiteKind.choices, default=SiteKind.FIELD)
    zone = models.CharField(max_length=60, blank=True, default="", validators=[validate_zone])
    records_from = models.DateField(null=True, blank=True)
    strokes_per_day = models.FloatField(
        null=True, blank=True, validators=[MinValueValidator(0), MaxValueValidator(1e7)]
    )
    hours_per_day = models.FloatField(null=True, blank=True, validators=[MinValueValidator(0), MaxValueValidator(24)])
    reports_at_once = models.BooleanField(
        "every failure is reported at once", null=True, blank=True, help_text="Not answered means: not known."
    )
    next_visit_on = models.DateField(null=True, blank=True)
    visit_every_days = models.PositiveIntegerField(null=True, blank=True, validators=[MinValueValidator(1)])
    folded = models.CharField(max_length=300, editable=False, default="")
    history = kept_history(excluded_fields=["folded"])

    objects = SiteQuerySet.as_manager()

    def save(self, *args: Any, **kwargs: Any) -> None:
        self.folded = fold(self.code, self.name)
        super().save(*args, **kwargs)

    @property
    def title(self) -> str:
        return self.name or self.code

    @property
    def tz(self) -> ZoneInfo:
        from fleet.models.book import book_zone

        return zone(self.zone or book_zone())

    def day_of(self, instant: dt.datetime) -> dt.date:
        """The site's own calendar day of an instant."""
        return instant.astimezone(self.tz).date()
