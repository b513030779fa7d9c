"""Counters, hour meters and measured wear. Readings are never edited: struck out and entered again."""

from __future__ import annotations

from django.core.validators import MaxValueValidator, MinValueValidator
from django.db import models
from django.db.models import Q

from fleet.models.at_site import AtSite, AtSiteQuerySet
from fleet.models.mixins import Entered, Strikeable
from fleet.models.module import Module
from fleet.models.module_type import Position
from fleet.models.visit import Visit

MOST_STROKES = 10**13


class Restart(models.TextChoices):
    """Why the face of a counter may fall: it passed its last digit, or was set back to nought."""

    ROLLED_OVER = "rolled over"
    RESET = "reset"


class Reading(AtSite, Strikeable, Entered):
    """What the face of a counter or meter said, or a play measured; the counter's serial tells segments apart."""

    module = models.ForeignKey(Module, on_delete=models.PROTECT, related_name="readings")
    read_at = models.DateTimeField()
    counter = models.CharField(max_length=60, blank=True, default="")
    restarts = models.CharField(max_length=11, choices=Restart.choices, blank=True, default="")
    strokes = models.BigIntegerField(
        null=True, blank=True, validators=[MinValueValidator(0), MaxValueValidator(MOST_STROKES)]
    )
    hours = models.FloatField(null=True, blank=True, validators=[MinValueValidator(0), MaxValueValidator(1e7)])
    position = models.ForeignKey(Position, on_delete=models.PROTECT, null=True, blank=True, related_name="+")
    play_mm = models.FloatField(null=True, blank=True, validators=[MinValueValidator(0), MaxValueValidator(1000)])
    visit = models.ForeignKey(Visit, on_delete=models.PROTECT, null=True, blank=True, related_name="readings")
    known_on = models.DateField()
    batch = models.ForeignKey("fleet.Work", on_delete=models.PROTECT, null=True, blank=True, related_name="+")

    objects = AtSiteQuerySet.as_manager()

    class Meta:
        ordering = ["module", "read_at", "id"]
        indexes = [models.Index(fields=["module", "read_at"])]
        constraints = [
            models.CheckConstraint(
                condition=Q(strokes__isnull=False) | Q(hours__isnull=False) | Q(play_mm__isnull=False),
                name="reading_says_something",
            ),
        ]

    def __str__(self) -> str:
        return f"{self.module} {self.read_at:%Y-%m-%d}"
