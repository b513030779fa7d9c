"""Models of module with their named positions."""

from __future__ import annotations

from typing import Any

from django.db import models

from fleet.history import kept_history
from fleet.models.codes import Coded, CodeField, natural_key
from fleet.models.component import Component
from fleet.models.mixins import Versioned
from fleet.models.open_to_all import OpenQuerySet


class ModuleType(Coded, Versioned):
    name = models.CharField(max_length=120, blank=True, default="")
    cautions = models.TextField(blank=True, default="", max_length=4000)
    history = kept_history()

    objects = OpenQuerySet.as_manager()

    @property
    def title(self) -> str:
        return self.name or self.code


class Position(Versioned):
    """One place, defined by the module type, that holds one part of one component."""

    type = models.ForeignKey(ModuleType, on_delete=models.PROTECT, related_name="positions")
    code = CodeField()
    code_order = models.CharField(max_length=200, editable=False, default="")
    component = models.ForeignKey(Component, on_delete=models.PROTECT, related_name="positions")
    order = models.PositiveIntegerField(default=0)
    history = kept_history()

    objects = OpenQuerySet.as_manager()

    class Meta:
        ordering = ["type", "order", "code_order"]
        constraints = [models.UniqueConstraint(fields=["type", "code"], name="position_once_a_type")]

    def __str__(self) -> str:
        return self.code

    def save(self, *args: Any, **kwargs: Any) -> None:
        self.code_order = natural_key(self.code)
        super().save(*args, **kwargs)
