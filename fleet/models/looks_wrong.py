"""Anyone may mark a record “looks wrong”; it waits until a planner or manager corrects or confirms it."""

from __future__ import annotations

from django.conf import settings
from django.db import models

from fleet.history import kept_history
from fleet.models.at_site import AtSite, AtSiteQuerySet
from fleet.models.mixins import Versioned
from fleet.models.module import Module


class RecordKind(models.TextChoices):
    VISIT = "visit"
    FITTING = "fitting"
    FINDING = "finding"
    STOP = "stop"
    READING = "reading"
    PLACEMENT = "placement"
    MODULE = "module"


class LooksWrongQuerySet(AtSiteQuerySet):
    def waiting(self) -> LooksWrongQuerySet:
        return self.filter(outcome="")


class LooksWrong(AtSite, Versioned):
    kind = models.CharField(max_length=9, choices=RecordKind.choices)
    record = models.BigIntegerField()  # primary key of the record it speaks of
    module = models.ForeignKey(Module, on_delete=models.PROTECT, related_name="doubts")
    word = models.CharField("why", max_length=500)
    said_by = models.ForeignKey(settings.AUTH_USER_MODEL, on_delete=models.PROTECT, related_name="+")
    said_at = models.DateTimeField(auto_now_add=True)
    outcome = models.CharField(
        max_length=9, blank=True, default="", choices=[("corrected", "corrected"), ("confirmed", "confirmed")]
    )
    answer = models.CharField(max_length=500, blank=True, default="")
    settled_by = models.ForeignKey(settings.AUTH_USER_MODEL, on_delete=models.PROTECT, null=True, related_name="+")
    settled_at = models.DateTimeField(null=True)
    history = kept_history()

    objects = LooksWrongQuerySet.as_manager()

    class Meta:
        ordering = ["-said_at", "-id"]

    def __str__(self) -> str:
        return f"{self.kind} {self.record}: {self.word}"
