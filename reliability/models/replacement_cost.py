"""What a planned replacement and a failure of a component cost, as the office entered it."""

from __future__ import annotations

from decimal import Decimal

from django.core.validators import MaxValueValidator, MinValueValidator
from django.db import models

from fleet.history import kept_history
from fleet.models import Component
from fleet.models.mixins import Versioned
from fleet.models.open_to_all import OpenQuerySet

LEAST = MinValueValidator(Decimal("0.01"))


class ReplacementCost(Versioned):
    """One row a component; its history tells what was believed before."""

    component = models.OneToOneField(Component, on_delete=models.PROTECT, related_name="replacement_cost")
    planned_cost = models.DecimalField(max_digits=10, decimal_places=2, validators=[LEAST])
    failure_cost = models.DecimalField(max_digits=10, decimal_places=2, validators=[LEAST])
    visit_every_days = models.PositiveIntegerField(
        null=True, blank=True, validators=[MinValueValidator(1), MaxValueValidator(3650)]
    )
    history = kept_history()

    objects = OpenQuerySet.as_manager()

    def __str__(self) -> str:
        return f"Costs of the {self.component.title}"
