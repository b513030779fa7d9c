"""Catalogue items."""

from __future__ import annotations

from typing import Any

from django.core.validators import MaxValueValidator, MinValueValidator
from django.db import models

from fleet.history import kept_history
from fleet.models.codes import Coded
from fleet.models.component import Component
from fleet.models.mixins import Versioned, fold
from fleet.models.module_type import ModuleType
from fleet.models.open_to_all import OpenQuerySet


class PartState(models.TextChoices):
    CURRENT = "current"
    ON_TRIAL = "on trial"
    ENDED = "ended"


class PartQuerySet(OpenQuerySet):
    def fitting_type(self, module_type: ModuleType) -> PartQuerySet:
        """Parts for a module type; a part without named types fits every one."""
        return self.filter(models.Q(fits_types=module_type) | models.Q(fits_types=None)).distinct()

    def current_design(self) -> PartQuerySet:
        """Those that nothing current supersedes."""
        replaced = Part.objects.filter(supersedes=models.OuterRef("pk"), state=PartState.CURRENT)
        return self.filter(state=PartState.CURRENT).exclude(models.Exists(replaced))


class Part(Coded, Versioned):
    """A catalogue item, number and revision, of one component."""

    component = models.ForeignKey(Component, on_delete=models.PROTECT, related_name="parts")
    revision = models.CharField(max_length=20, blank=True, default="")
    name = models.CharField(max_length=120, blank=True, default="")
    supersedes = models.ForeignKey(
        "self", on_delete=models.PROTECT, null=True, blank=True, related_name="superseded_by"
    )
    fits_types = models.ManyToManyField(ModuleType, blank=True, related_name="parts")
    state = models.CharField(max_length=8, choices=PartState.choices, default=PartState.CURRENT)
    supplier = models.CharField(max_length=120, blank=True, default="")
    unit_cost = models.DecimalField(
        max_digits=10, decimal_places=2, null=True, blank=True, validators=[MinValueValidator(0)]
    )
    lead_time_days = models.PositiveIntegerField(null=True, blank=True, validators=[MaxValueValidator(3650)])
    pack = models.PositiveIntegerField(default=1, validators=[MinValueValidator(1)])
    minimum = models.PositiveIntegerField(default=0)
    folded = models.CharField(max_length=300, editable=False, default="")
    history = kept_history(excluded_fields=["folded"], m2m_fields=[fits_types])

    objects = PartQuerySet.as_manager()

    def save(self, *args: Any, **kwargs: Any) -> None:
        self.folded = fold(self.code, self.name)
        super().save(*args, **kwargs)

    @property
    def title(self) -> str:
        return f"{self.code} {self.name}".strip()
