"""A module standing still."""

from __future__ import annotations

from django.conf import settings
from django.db import models
from django.db.models import F, Q

from fleet.history import kept_history
from fleet.models.at_site import AtSite, AtSiteQuerySet
from fleet.models.mixins import Entered, Strikeable, Versioned
from fleet.models.module import Module
from fleet.models.visit import Visit


class StopQuerySet(AtSiteQuerySet):
    def now(self) -> StopQuerySet:
        return self.filter(running_at=None, struck_out="")


class Stop(AtSite, Versioned, Strikeable, Entered):
    """Since when a module stands still, until when, and who reported it."""

    module = models.ForeignKey(Module, on_delete=models.PROTECT, related_name="stops")
    stopped_at = models.DateTimeField()
    running_at = models.DateTimeField(null=True, blank=True)
    reported_by = models.ForeignKey(
        settings.AUTH_USER_MODEL, on_delete=models.PROTECT, null=True, blank=True, related_name="+"
    )
    known_on = models.DateField()
    visit = models.ForeignKey(Visit, on_delete=models.PROTECT, null=True, blank=True, related_name="stops")
    note = models.TextField(blank=True, default="", max_length=4000)
    history = kept_history()

    objects = StopQuerySet.as_manager()

    class Meta:
        ordering = ["-stopped_at", "-id"]
        indexes = [models.Index(fields=["module", "stopped_at"])]
        constraints = [
            models.CheckConstraint(
                condition=Q(running_at=None) | Q(running_at__gte=F("stopped_at")), name="stop_in_order"
            ),
            models.UniqueConstraint(
                fields=["module"], condition=Q(running_at=None, struck_out=""), name="one_stop_now"
            ),
        ]

    def __str__(self) -> str:
        return f"{self.module} stopped {self.stopped_at:%Y-%m-%d}"
