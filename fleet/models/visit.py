"""One crew's attendance at one module on one day, and what it saw without changing a part."""

from __future__ import annotations

from django.conf import settings
from django.db import models

from fleet.history import kept_history
from fleet.models.at_site import AtSite, AtSiteQuerySet
from fleet.models.codes import Coded
from fleet.models.component import FailureMode
from fleet.models.mixins import Entered, Strikeable, Versioned
from fleet.models.module import Module
from fleet.models.module_type import Position


class Left(models.TextChoices):
    RUNNING = "running"
    STOPPED = "stopped"
    TO_BENCH = "to bench"


class Visit(Coded, AtSite, Versioned, Strikeable, Entered):
    """Every field change belongs to a visit; a visit may also find nothing wrong."""

    module = models.ForeignKey(Module, on_delete=models.PROTECT, related_name="visits")
    happened_at = models.DateTimeField()
    happened_on = models.DateField(editable=False)  # the site's own day of happened_at
    crew = models.ForeignKey(
        settings.AUTH_USER_MODEL, on_delete=models.PROTECT, null=True, blank=True, related_name="visits"
    )
    left = models.CharField(max_length=8, choices=Left.choices, blank=True, default="")
    known_on = models.DateField()
    note = models.TextField(blank=True, default="", max_length=4000)
    history = kept_history()

    objects = AtSiteQuerySet.as_manager()

    class Meta:
        ordering = ["-happened_at", "-id"]
        indexes = [
            models.Index(fields=["module", "happened_on"]),
            models.Index(fields=["site", "happened_on"]),
            models.Index(fields=["happened_on"]),
        ]


class FoundKind(models.TextChoices):
    FAILED = "failed"
    ADJUSTED = "adjusted"
    CLEANED = "cleaned"
    NOTHING = "nothing found"


class FindingQuerySet(AtSiteQuerySet):
    site_path = "visit__site"


class Finding(Versioned, Strikeable):
    """What a crew saw or did at a position without changing the part."""

    visit = models.ForeignKey(Visit, on_delete=models.PROTECT, related_name="findings")
    position = models.ForeignKey(Position, on_delete=models.PROTECT, related_name="+")
    finding = models.CharField(max_length=13, choices=FoundKind.choices)
    mode = models.ForeignKey(FailureMode, on_delete=models.PROTECT, null=True, blank=True, related_name="+")
    note = models.TextField(blank=True, default="", max_length=4000)
    history = kept_history()

    objects = FindingQuerySet.as_manager()

    class Meta:
        ordering = ["visit", "position__order", "id"]

    def __str__(self) -> str:
        return f"{self.position}: {self.finding}"
