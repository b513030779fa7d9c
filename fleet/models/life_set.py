"""Life data without histories (lives.csv): for analysis only; equal rows are separate lives."""

from __future__ import annotations

from django.core.validators import MinValueValidator
from django.db import models

from fleet.models.codes import Coded
from fleet.models.component import Clock, Component
from fleet.models.mixins import Entered
from fleet.models.open_to_all import OpenQuerySet
from fleet.models.part import Part


class LifeSet(Coded, Entered):
    """A set of lives, imported once."""

    objects = OpenQuerySet.as_manager()


class SetLife(models.Model):
    set = models.ForeignKey(LifeSet, on_delete=models.CASCADE, related_name="lives")
    component = models.ForeignKey(Component, on_delete=models.PROTECT, related_name="+")
    part = models.ForeignKey(Part, on_delete=models.PROTECT, null=True, blank=True, related_name="+")
    age = models.FloatField(validators=[MinValueValidator(0)])
    observed = models.BooleanField()
    entry_age = models.FloatField(default=0)
    last_good_age = models.FloatField(null=True, blank=True)
    count = models.PositiveIntegerField(default=1)
    site = models.CharField(max_length=40, blank=True, default="")
    clock = models.CharField(max_length=7, choices=Clock.choices)

    objects = OpenQuerySet.as_manager()

    class Meta:
        indexes = [models.Index(fields=["component", "set"])]

    def __str__(self) -> str:
        return f"{self.set_id} {self.age}"
