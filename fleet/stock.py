"""What the ledger and the orders say: on hand, due, below a minimum, deliveries and how long they took."""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass
from typing import Any

from django.db.models import F, IntegerField, Min, OuterRef, Q, QuerySet, Subquery, Sum
from django.db.models.functions import Coalesce, Greatest

from fleet.models import Condition, Part, StockBalance, Store
from fleet.rights import STOCK, may


def counted_of(rows: QuerySet[Any], measure: str) -> Any:
    """The sum of a measure by part, 0 where there is none."""
    sums = rows.filter(part=OuterRef("pk")).order_by().values("part").annotate(n=Sum(measure)).values("n")
    return Coalesce(Subquery(sums, output_field=IntegerField()), 0)


def with_stock(parts: QuerySet[Any], balances: QuerySet[Any], lines: QuerySet[Any]) -> QuerySet[Any]:
    """Adds on hand (of these balances), how many of it are used, what is due and when the next delivery is."""
    coming = lines.open()  # type: ignore[attr-defined]
    first = coming.filter(part=OuterRef("pk")).order_by().values("part").annotate(d=Min("due_on")).values("d")
    return parts.annotate(
        on_hand=counted_of(balances, "on_hand"),
        used=counted_of(balances.filter(condition=Condition.USED), "on_hand"),
        due=counted_of(coming, "due"),
        next_due=Subquery(first),
    ).annotate(missing=Greatest(F("minimum") - F("on_hand"), 0))


def kept_parts(parts: QuerySet[Any]) -> QuerySet[Any]:
    """Rows `with_stock` that a list of stock has something to say about."""
    return parts.filter(Q(minimum__gt=0) | ~Q(on_hand=0) | Q(due__gt=0) | Q(state="current"))


def on_hand(store: Store, part: Part) -> dict[str, int]:
    """By condition."""
    return dict(StockBalance.objects.filter(store=store, part=part).values_list("condition", "on_hand"))


@dataclass(frozen=True)
class Delivery:
    """One receipt against a line: how long it took, and whether it came late."""

    part: Part
    supplier: str
    ordered_on: dt.date
    due_on: dt.date | None
    received_on: dt.date
    quantity: int

    @property
    def lead_time(self) -> int:
        return (self.received_on - self.ordered_on).days

    @property
    def late_by(self) -> int | None:
        return None if self.due_on is None else (self.received_on - self.due_on).days


def deliveries(receipts: QuerySet[Any]) -> list[Delivery]:
    """Of these moves those that came against an order, the oldest first."""
    rows = (
        receipts.filter(line__isnull=False, struck_out="")
        .select_related("part", "line", "line__order")
        .order_by("happened_on", "pk")
    )
    return [
        Delivery(
            move.part, move.line.order.supplier, move.line.order.ordered_on, move.line.due_on, move.happened_on,
            move.quantity,
        )
        for move in rows
    ]  # fmt: skip


def lead_times(receipts: QuerySet[Any]) -> QuerySet[Any]:
    """Receipts against orders with the days they took, for lists."""
    return receipts.filter(line__isnull=False, struck_out="").annotate(
        took=F("happened_on") - F("line__order__ordered_on"), late=F("happened_on") - F("line__due_on")
    )


def days_of(span: Any) -> int | None:
    """A difference of two days as either engine gives it."""
    if span is None:
        return None
    return span.days if isinstance(span, dt.timedelta) else int(span)


def due_of(lines: QuerySet[Any]) -> dict[int, int]:
    """What is still to come, by part."""
    found: dict[int, int] = {}
    for part, due in lines.open().values_list("part_id", "due"):  # type: ignore[attr-defined]
        found[part] = found.get(part, 0) + due
    return found


def sees_all_stock(person: Any) -> bool:
    """A minimum is the whole book's: who sees some of the stores cannot tell whether it is reached."""
    return bool(person.all_sites and may(person, STOCK))
