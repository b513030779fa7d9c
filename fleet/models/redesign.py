"""A part that replaces another, and the plan by which modules get it."""

from __future__ import annotations

from typing import TYPE_CHECKING

from django.core.validators import MaxValueValidator, MinValueValidator
from django.db import models
from django.db.models import Q

from fleet.history import kept_history
from fleet.models.codes import Coded
from fleet.models.mixins import Strikeable, StrikeableQuerySet, Versioned
from fleet.models.module import Module
from fleet.models.open_to_all import OpenQuerySet
from fleet.models.part import Part

if TYPE_CHECKING:
    from fleet.models.person import Person


class Redesign(Coded, Versioned):
    """What is hoped of a change, what it costs a module, and since when it counts."""

    name = models.CharField(max_length=120, blank=True, default="")
    hope = models.FloatField(
        "hope, times as long a life",
        default=1.5,
        validators=[MinValueValidator(1.01), MaxValueValidator(100)],
        help_text="The factor of life that the redesign is meant to reach.",
    )
    starts_on = models.DateField("first day of the rollout", null=True, blank=True)
    cost_a_module = models.DecimalField(
        "cost of the rollout a module",
        max_digits=10,
        decimal_places=2,
        null=True,
        blank=True,
        validators=[MinValueValidator(0)],
    )
    visits_a_failure = models.FloatField(
        "crew visits a failure", default=1.0, validators=[MinValueValidator(0), MaxValueValidator(100)]
    )
    bench_hours_a_failure = models.FloatField(
        "bench hours a failure", default=0.0, validators=[MinValueValidator(0), MaxValueValidator(1000)]
    )
    stop_days_a_failure = models.FloatField(
        "days of standstill a failure", default=1.0, validators=[MinValueValidator(0), MaxValueValidator(365)]
    )
    note = models.CharField(max_length=2000, blank=True, default="")
    history = kept_history()

    objects = OpenQuerySet.as_manager()

    @property
    def title(self) -> str:
        return f"{self.code} {self.name}".strip()


class RedesignChange(models.Model):
    """One component's side of a redesign: the new part and those that it takes the place of."""

    redesign = models.ForeignKey(Redesign, on_delete=models.PROTECT, related_name="changes")
    new_part = models.ForeignKey(Part, on_delete=models.PROTECT, related_name="redesigns")
    replaces = models.ManyToManyField(Part, related_name="replaced_in")
    history = kept_history(m2m_fields=[replaces])

    objects = OpenQuerySet.as_manager()

    class Meta:
        ordering = ["redesign", "new_part__component__code_order"]
        constraints = [models.UniqueConstraint(fields=["redesign", "new_part"], name="new_part_once_a_redesign")]

    def __str__(self) -> str:
        return f"{self.new_part} in {self.redesign}"


class RolloutStepQuerySet(StrikeableQuerySet):
    def for_person(self, person: Person) -> RolloutStepQuerySet:
        """The modules that the person sees."""
        if person.all_sites and person.role != "bench":
            return self
        return self.filter(module__in=Module.objects.for_person(person))


class RolloutStep(Versioned, Strikeable):
    """A module in a rollout: its place in the order and the day it is planned for; visits say when it was done."""

    redesign = models.ForeignKey(Redesign, on_delete=models.PROTECT, related_name="steps")
    module = models.ForeignKey(Module, on_delete=models.PROTECT, related_name="rollout_steps")
    order = models.PositiveIntegerField(default=0)
    planned_on = models.DateField(null=True, blank=True)
    history = kept_history()

    objects = RolloutStepQuerySet.as_manager()

    class Meta:
        ordering = ["redesign", "order", "id"]
        constraints = [
            models.UniqueConstraint(
                fields=["redesign", "module"], condition=Q(struck_out=""), name="module_once_in_a_rollout"
            )
        ]

    def __str__(self) -> str:
        return f"{self.module} in {self.redesign}"
