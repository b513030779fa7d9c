"""Sorts of part and the ways they fail."""

from __future__ import annotations

from typing import Any

from django.db import models

from fleet.history import kept_history
from fleet.models.codes import Coded, CodeField, natural_key
from fleet.models.mixins import Versioned
from fleet.models.open_to_all import OpenQuerySet


class Clock(models.TextChoices):
    DAYS = "days"
    HOURS = "hours"
    STROKES = "strokes"


class Component(Coded, Versioned):
    """A sort of part (ISO 14224: maintainable item) with the clock its life is counted in."""

    name = models.CharField(max_length=120, blank=True, default="")
    clock = models.CharField(max_length=7, choices=Clock.choices)
    history = kept_history()

    objects = OpenQuerySet.as_manager()

    @property
    def title(self) -> str:
        return self.name or self.code


class FailureMode(Versioned):
    """How a component fails, from its own list; mechanism and cause in the sense of ISO 14224."""

    component = models.ForeignKey(Component, on_delete=models.PROTECT, related_name="modes")
    code = CodeField()
    code_order = models.CharField(max_length=200, editable=False, default="")
    name = models.CharField(max_length=120, blank=True, default="")
    mechanism = models.CharField(max_length=120, blank=True, default="")
    cause = models.CharField(max_length=120, blank=True, default="")
    goes_to_bench = models.BooleanField(default=False)
    history = kept_history()

    objects = OpenQuerySet.as_manager()

    class Meta:
        ordering = ["component", "code_order"]
        constraints = [models.UniqueConstraint(fields=["component", "code"], name="mode_once_a_component")]

    def __str__(self) -> str:
        return self.name or self.code

    @property
    def title(self) -> str:
        return self.name or self.code

    def save(self, *args: Any, **kwargs: Any) -> None:
        self.code_order = natural_key(self.code)
        super().save(*args, **kwargs)
