"""The stores' records as the order list takes them: what lies there, what is due, how long past orders took."""

from __future__ import annotations

import datetime as dt
from collections import defaultdict
from collections.abc import Collection, Iterable
from typing import Any

from django.db.models import QuerySet

from fleet.models import Book, Part, StockBalance, StockMove, SupplyLine
from fleet.stock import days_of, with_stock
from reliability.forecasts.order_list import Due, PastDelivery, Rules, Shelf

DELIVERIES_SINCE = dt.timedelta(days=3 * 365)
MOST_DELIVERIES = 60  # of a part: older ones say little of the next


def shelves(
    today: dt.date, needed: Iterable[str], until: dict[str, dt.date] | None = None, none_failed: Collection[str] = ()
) -> list[Shelf]:
    """Every part that lies somewhere, is due, has a minimum, is current or is `needed`; until: its last day in use;
    none_failed: components without a failure so far.
    """
    parts = with_stock(Part.objects.all(), StockBalance.objects.all(), SupplyLine.objects.all())
    wanted, ends = set(needed), until or {}
    due, came, followers = dues(), deliveries(today), successors()
    return [
        Shelf(
            part=part.code,
            name=part.name,
            on_hand=part.on_hand,
            due=tuple(due.get(part.pk, ())),
            deliveries=tuple(came.get(part.pk, ())),
            lead_time_days=part.lead_time_days,
            pack=part.pack,
            keep_at_least=0 if part.code in ends or part.state != "current" else part.minimum,
            unit_cost=part.unit_cost,
            supplier=part.supplier,
            superseded_by=followers.get(part.code, ""),
            used_until=ends.get(part.code),
            none_failed=part.component.code in none_failed,
        )
        for part in parts.select_related("component").order_by("code_order")
        if part.code in wanted or part.minimum or part.on_hand or part.due or part.state == "current"
    ]


def dues() -> dict[int, list[Due]]:
    """What is still to come, by part."""
    found: dict[int, list[Due]] = defaultdict(list)
    rows = SupplyLine.objects.open().values_list("part_id", "due", "order__ordered_on", "due_on")
    for part, quantity, ordered_on, due_on in rows.order_by("due_on", "pk"):
        found[part].append(Due(quantity, ordered_on, due_on))
    return found


def deliveries(today: dt.date) -> dict[int, list[PastDelivery]]:
    """What came against orders, by part, the latest of each."""
    rows: QuerySet[Any] = (
        StockMove.objects.standing()
        .filter(line__isnull=False, kind="receipt", happened_on__gte=today - DELIVERIES_SINCE)
        .order_by("-happened_on", "-pk")
        .values_list("part_id", "quantity", "line__quantity", "happened_on", "line__order__ordered_on", "line__due_on")
    )
    found: dict[int, list[PastDelivery]] = defaultdict(list)
    for part, came, ordered, day, ordered_on, due_on in rows.iterator(chunk_size=2000):
        if len(found[part]) < MOST_DELIVERIES and day >= ordered_on:
            promised = None if due_on is None else float(days_of(due_on - ordered_on) or 0) or None
            found[part].append(PastDelivery(float((day - ordered_on).days), min(came / ordered, 1.0), promised))
    return found


def successors() -> dict[str, str]:
    """The design in force that came after a part, at the end of its line."""
    after = dict(Part.objects.filter(supersedes__isnull=False, state="current").values_list("supersedes__code", "code"))
    found = {}
    for part in after:
        last, seen = part, {part}
        while last in after and after[last] not in seen:
            last = after[last]
            seen.add(last)
        found[part] = last
    return found


def rules(today: dt.date, *, service_level: float | None = None) -> Rules:
    book = Book.load()
    level = book.service_level if service_level is None else service_level
    return Rules(today, book.review_period_days, level, seed=today.toordinal())
