"""What is on order. Deliveries are receipts: several may come against one line."""

from __future__ import annotations

from decimal import Decimal
from typing import TYPE_CHECKING

from django.core.validators import MaxValueValidator, MinValueValidator
from django.db import models
from django.db.models import F, IntegerField, OuterRef, Q, Subquery, Sum
from django.db.models.functions import Coalesce

from fleet.history import kept_history
from fleet.models.codes import Coded
from fleet.models.mixins import Entered, Strikeable, StrikeableQuerySet, Versioned
from fleet.models.part import Part

if TYPE_CHECKING:
    from fleet.models.person import Person

MOST_PIECES = 1_000_000


class SupplyOrderQuerySet(models.QuerySet):
    def for_person(self, person: Person) -> SupplyOrderQuerySet:
        """Orders belong to no site: the office's own."""
        from fleet.rights import STOCK, may

        return self if may(person, STOCK) else self.none()


class SupplyOrder(Coded, Versioned, Entered):
    """One order to one supplier, placed on a day."""

    supplier = models.CharField(max_length=120, blank=True, default="")
    ordered_on = models.DateField()
    history = kept_history()

    objects = SupplyOrderQuerySet.as_manager()


class SupplyLineQuerySet(StrikeableQuerySet):
    def for_person(self, person: Person) -> SupplyLineQuerySet:
        return self.filter(order__in=SupplyOrder.objects.for_person(person))

    def newest(self) -> int:
        """The line entered last: what a page that is opened now has seen."""
        return int(self.aggregate(newest=models.Max("pk"))["newest"] or 0)

    def with_received(self) -> SupplyLineQuerySet:
        """Adds what came so far (`received`) and what is still to come (`due`)."""
        from fleet.models.stock_move import StockMove

        came = StockMove.objects.standing().filter(line=OuterRef("pk")).order_by().values("line")
        received = Coalesce(Subquery(came.annotate(n=Sum("quantity")).values("n")), 0, output_field=IntegerField())
        return self.annotate(received=received).annotate(due=F("quantity") - F("received"))

    def open(self) -> SupplyLineQuerySet:
        """Lines of which something is still to come."""
        return self.standing().with_received().filter(due__gt=0)  # type: ignore[attr-defined]


class SupplyLine(Versioned, Strikeable, Entered):
    """So many of a part; a line of which nothing more is to come is cut to what came."""

    order = models.ForeignKey(SupplyOrder, on_delete=models.PROTECT, related_name="lines")
    part = models.ForeignKey(Part, on_delete=models.PROTECT, related_name="supply_lines")
    quantity = models.PositiveIntegerField(validators=[MinValueValidator(1), MaxValueValidator(MOST_PIECES)])
    due_on = models.DateField(null=True, blank=True)
    unit_cost = models.DecimalField(
        max_digits=10, decimal_places=2, null=True, blank=True, validators=[MinValueValidator(Decimal(0))]
    )
    history = kept_history()

    objects = SupplyLineQuerySet.as_manager()

    class Meta:
        ordering = ["order", "part__code_order"]
        indexes = [models.Index(fields=["part", "struck_out"])]
        constraints = [
            models.UniqueConstraint(fields=["order", "part"], condition=Q(struck_out=""), name="part_once_an_order")
        ]

    def __str__(self) -> str:
        return f"{self.part} on {self.order}"
