"""The order list of the whole book: made from the kept use and the stores as they are, kept until something moves."""

from __future__ import annotations

import datetime as dt
import json
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any

from django.utils import timezone

from fleet.models import Component, DataVersion
from reliability.forecasts.coming_use import ComingUse, kept_uses
from reliability.forecasts.order_list import OrderList, Rules, Shelf, order_list
from reliability.forecasts.shelves import rules, shelves, state_of
from reliability.forecasts.supply_words import list_sentence, reasons, superseded
from reliability.forecasts.switching import Switch, switched
from reliability.kept import key_of
from reliability.models import KeptResult

KIND = "order list"


@dataclass(frozen=True)
class Made:
    """A list with what it was made from."""

    found: OrderList
    today: dt.date
    switches: Sequence[Switch]
    uses: dict[str, ComingUse]


def make_list(
    today: dt.date, *, assumed: Iterable[Switch] = (), service_level: float | None = None, count: bool = True
) -> Made:
    """From what is kept of the coming use; components that are not counted yet are counted now."""
    uses = kept_uses(Component.objects.all(), count=count)
    told = switched(uses, assumed)
    asked = rules(today, service_level=service_level)
    needed = [part for use in uses.values() for part in use.used]
    listed = shelves(today, needed, told.until)
    return Made(order_list(listed, told.use, asked), today, told.switches, uses)


def order_document(*, currency: str, today: dt.date | None = None) -> dict[str, Any]:
    """The list as it stands, kept until a part moves, is ordered or counted anew, or a setting changes."""
    day = today or timezone.localdate()
    uses = kept_uses(Component.objects.all(), count=True)
    state = stand(day, uses, currency)
    row = KeptResult.objects.filter(kind=KIND, key=key_of({"today": day})).first()
    if row is not None:
        kept = json.loads(bytes(row.payload))
        if kept["state"] == state:
            return {**kept, "made_at": row.made_at}
    document = {**told(make_list(day), currency), "state": state}
    text = json.dumps(document, allow_nan=False, separators=(",", ":"))
    KeptResult.objects.filter(kind=KIND, made_at__lt=timezone.now() - dt.timedelta(days=3)).delete()
    row, _ = KeptResult.objects.update_or_create(
        kind=KIND,
        key=key_of({"today": day}),
        defaults={"data_version": DataVersion.current(), "payload": text.encode(), "made_at": timezone.now()},
    )
    return {**json.loads(text), "made_at": row.made_at}


def last_document(today: dt.date | None = None) -> dict[str, Any] | None:
    """Today's list as it was last made, without looking whether anything moved since; None if there is none."""
    day = today or timezone.localdate()
    row = KeptResult.objects.filter(kind=KIND, key=key_of({"today": day})).first()
    return None if row is None else {**json.loads(bytes(row.payload)), "made_at": row.made_at}


def stand(today: dt.date, uses: dict[str, ComingUse], currency: str) -> str:
    """Changes with whatever the list is made from."""
    needed = [part for use in uses.values() for part in use.used]
    listed: list[Shelf] = shelves(today, needed)
    asked: Rules = rules(today)
    counted = sorted((code, use.counted_at.isoformat()) for code, use in uses.items())
    # plans and designs raise the data version
    return key_of({"shelves": state_of(listed, asked), "counted": counted, "currency": currency,
                   "version": DataVersion.current()})  # fmt: skip


def told(made: Made, currency: str) -> dict[str, Any]:
    """As plain values: lines with their reasons in words, cost, and which components could not be counted."""
    document = made.found.document()
    for line, plain in zip(made.found.lines, document["lines"], strict=True):
        plain["reasons"] = reasons(line, made.today)
        plain["superseded"] = superseded(line, made.today)
        plain["below"] = line.known and line.on_hand + line.due <= line.reorder_level and line.quantity > 0
    return {
        "as_of": made.today.isoformat(),
        "sentence": list_sentence(made.found, currency),
        "currency": currency,
        "counted_at": min((use.counted_at for use in made.uses.values()), default=timezone.now()).isoformat(),
        "current": all(use.current for use in made.uses.values()),
        "unknown": sorted(code for code, use in made.uses.items() if not use.known),
        "switches": [
            {"component": each.component, "old": each.old, "new": each.new, "planned": each.planned,
             "until": None if each.until is None else each.until.isoformat(), "pieces": sum(each.pieces)}
            for each in made.switches
        ],
        **document,
    }  # fmt: skip
