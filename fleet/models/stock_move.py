"""The ledger of stock: the only truth about what lies where. On hand is the sum of standing moves."""

from __future__ import annotations

from typing import TYPE_CHECKING

from django.core.validators import MaxValueValidator, MinValueValidator
from django.db import models
from django.db.models import F, Q

from fleet.history import kept_history
from fleet.models.bench import BenchJob
from fleet.models.codes import Coded
from fleet.models.mixins import Entered, Strikeable, StrikeableQuerySet, Versioned
from fleet.models.part import Part
from fleet.models.store import Store
from fleet.models.supply import MOST_PIECES, SupplyLine
from fleet.models.visit import Visit

if TYPE_CHECKING:
    from fleet.models.person import Person


class MoveKind(models.TextChoices):
    RECEIPT = "receipt"
    ISSUE = "issue"
    COUNT = "count"
    TRANSFER = "transfer"
    SCRAP = "scrap"


class Condition(models.TextChoices):
    NEW = "new"
    USED = "used"


class StockMoveQuerySet(StrikeableQuerySet):
    def for_person(self, person: Person) -> StockMoveQuerySet:
        """Moves of a store that they see, at either end."""
        stores = Store.objects.for_person(person)
        if person.all_sites and person.role != "bench" and person.role != "contact":
            return self
        return self.filter(Q(store__in=stores.values("pk")) | Q(other_store__in=stores.values("pk")))

    def at(self, store: Store) -> StockMoveQuerySet:
        return self.filter(Q(store=store) | Q(other_store=store))


class StockMove(Coded, Versioned, Strikeable, Entered):
    """So many pieces, signed as the store sees it; a transfer is one row, and the other store sees the opposite."""

    store = models.ForeignKey(Store, on_delete=models.PROTECT, related_name="moves")
    part = models.ForeignKey(Part, on_delete=models.PROTECT, related_name="moves")
    happened_on = models.DateField()
    quantity = models.IntegerField(validators=[MinValueValidator(-MOST_PIECES), MaxValueValidator(MOST_PIECES)])
    kind = models.CharField(max_length=8, choices=MoveKind.choices)
    other_store = models.ForeignKey(
        Store, on_delete=models.PROTECT, null=True, blank=True, related_name="moves_from_other"
    )
    visit = models.ForeignKey(Visit, on_delete=models.PROTECT, null=True, blank=True, related_name="moves")
    job = models.ForeignKey(BenchJob, on_delete=models.PROTECT, null=True, blank=True, related_name="moves")
    line = models.ForeignKey(SupplyLine, on_delete=models.PROTECT, null=True, blank=True, related_name="receipts")
    condition = models.CharField(max_length=4, choices=Condition.choices, default=Condition.NEW)
    reason = models.CharField(max_length=500, blank=True, default="")
    history = kept_history()

    objects = StockMoveQuerySet.as_manager()

    class Meta:
        ordering = ["-happened_on", "-id"]
        indexes = [
            models.Index(fields=["store", "part"]),
            models.Index(fields=["other_store", "part"]),
            models.Index(fields=["part", "happened_on"]),
            models.Index(fields=["store", "happened_on"]),
            models.Index(fields=["happened_on"]),  # the newest of all
            models.Index(fields=["happened_on"], condition=Q(line__isnull=False), name="deliveries_by_day"),
        ]
        constraints = [
            models.CheckConstraint(
                condition=(Q(kind=MoveKind.TRANSFER) & Q(other_store__isnull=False) & ~Q(other_store=F("store")))
                | (~Q(kind=MoveKind.TRANSFER) & Q(other_store=None)),
                name="transfer_has_two_stores",
            ),
            models.CheckConstraint(
                condition=Q(kind=MoveKind.COUNT)
                | (Q(kind=MoveKind.RECEIPT) & Q(quantity__gt=0))
                | (Q(kind__in=[MoveKind.ISSUE, MoveKind.SCRAP]) & Q(quantity__lt=0))
                | (Q(kind=MoveKind.TRANSFER) & ~Q(quantity=0)),
                name="move_has_its_sign",
            ),
        ]


class StockBalanceQuerySet(models.QuerySet):
    def for_person(self, person: Person) -> StockBalanceQuerySet:
        return self.filter(store__in=Store.objects.for_person(person).values("pk"))


class StockBalance(models.Model):
    """Derived from the ledger, in the transaction of each move: what a list reads, and the row that two issues wait on.

    `rebuild_balances` makes it again from the moves; nobody edits it.
    """

    store = models.ForeignKey(Store, on_delete=models.CASCADE, related_name="balances")
    part = models.ForeignKey(Part, on_delete=models.CASCADE, related_name="balances")
    condition = models.CharField(max_length=4, choices=Condition.choices, default=Condition.NEW)
    on_hand = models.BigIntegerField(default=0)
    changes = models.BigIntegerField(default=0)  # goes up with each move, so that an import sees that one came between
    counted_on = models.DateField(null=True, blank=True)

    objects = StockBalanceQuerySet.as_manager()

    class Meta:
        indexes = [models.Index(fields=["part"])]
        constraints = [
            models.UniqueConstraint(fields=["store", "part", "condition"], name="one_balance_a_store_and_part")
        ]

    def __str__(self) -> str:
        return f"{self.on_hand} of {self.part} ({self.condition}) at {self.store}"
