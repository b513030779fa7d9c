"""Parts are ordered from a supplier."""

from __future__ import annotations

import datetime as dt
import uuid
from collections.abc import Sequence
from dataclasses import dataclass
from decimal import Decimal

from django.utils import timezone

from fleet.actions.base import change, once
from fleet.actions.checks_values import clean_planned_day, need_day
from fleet.actions.errors import BadValue, OrderedMeanwhile, RecordError, day_words
from fleet.actions.writes import add
from fleet.models import Book, Part, Person, SupplyLine, SupplyOrder
from fleet.models.zones import zone
from fleet.rights import STOCK


@dataclass(frozen=True)
class OrderedPart:
    """A line of an order; without a day the part's own lead time tells when it is due, without a cost its own cost."""

    part: Part
    quantity: int
    due_on: dt.date | None = None
    unit_cost: Decimal | None = None


def place_supply_order(
    *,
    by: Person | None,
    lines: Sequence[OrderedPart],
    supplier: str = "",
    ordered_on: dt.date | None = None,
    entry_key: uuid.UUID | None = None,
    code: str | None = None,
    newest: int | None = None,
) -> SupplyOrder:
    """All lines in one order; its code is the supplier's or the book's own.

    `newest` is the line entered last when the page was opened: who orders the same part at the same time is told.
    """
    said = (lines, supplier, ordered_on, code)
    with (
        change(by=by, right=STOCK, raises_version=False),
        once(entry_key, by=by, verb="place_supply_order", said=said) as answer,
    ):
        if "order" in answer:
            return SupplyOrder.objects.get(pk=answer["order"])
        today = timezone.now().astimezone(zone(Book.load().zone)).date()
        day = today if ordered_on is None else need_day(ordered_on, field="ordered_on", today=today)
        if not lines:
            raise BadValue("The order holds no part yet. Enter how many of at least one.")
        check_not_ordered_meanwhile(lines, newest)
        order = SupplyOrder(supplier=supplier, ordered_on=day, entered_by=by)
        add(order, code=code or None, prefix="SO")
        seen: set[int] = set()
        for row, line in enumerate(lines):
            try:
                if line.part.pk in seen:
                    raise BadValue(f"{line.part.code} stands twice on this order. Enter one line.", field="part")
                write_line(order, line, by)
            except RecordError as error:
                error.data["row"] = row
                raise
            seen.add(line.part.pk)
        answer["order"] = order.pk
    return order


def check_not_ordered_meanwhile(lines: Sequence[OrderedPart], newest: int | None) -> None:
    """Under the locks of the parts, so that of two who order at one moment the second sees what the first did."""
    if newest is None:
        return
    parts = Part.objects.filter(pk__in=[line.part.pk for line in lines]).order_by("pk")
    locked = list(parts.select_for_update(of=("self",), no_key=True).values_list("pk", flat=True))
    since = SupplyLine.objects.standing().filter(part__in=locked, pk__gt=newest).select_related("order", "part")
    line = since.order_by("pk").last()
    if line is not None:
        who = line.entered_by.name if line.entered_by is not None else "Somebody"
        raise OrderedMeanwhile(
            who=who, quantity=line.quantity, part=line.part.code, order=line.order.code,
            newest=SupplyLine.objects.newest(),
        )  # fmt: skip


def write_line(order: SupplyOrder, line: OrderedPart, by: Person | None) -> SupplyLine:
    due = clean_planned_day(line.due_on, field="due_on")
    if due is None and line.part.lead_time_days is not None:
        due = order.ordered_on + dt.timedelta(days=line.part.lead_time_days)
    record = SupplyLine(
        order=order,
        part=line.part,
        quantity=line.quantity,
        due_on=due,
        unit_cost=line.part.unit_cost if line.unit_cost is None else line.unit_cost,
        entered_by=by,
    )
    check_due(record, order)
    return add(record)


def check_due(line: SupplyLine, order: SupplyOrder) -> None:
    if line.due_on is not None and line.due_on < order.ordered_on:
        raise BadValue(
            f"Due on {day_words(line.due_on)}, before it was ordered on {day_words(order.ordered_on)}. "
            "Enter a day from then on.",
            field="due_on",
        )
