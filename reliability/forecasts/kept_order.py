"""The order list of the whole book: made from the kept use and the stores as they are.

A line is kept until its part moves, is ordered or counted anew, or a setting or plan changes; so a list after one issue
costs one line.
"""

from __future__ import annotations

import datetime as dt
import json
from collections.abc import Iterable, Sequence
from dataclasses import asdict
from decimal import Decimal
from typing import Any

from django.utils import timezone

from fleet.models import Component, DataVersion, Part
from reliability.forecasts.coming_use import ComingUse, kept_uses
from reliability.forecasts.order_list import OrderLine, Rules, Shelf, order_line
from reliability.forecasts.shelves import rules, shelves
from reliability.forecasts.supply_words import order_sentence, reasons
from reliability.forecasts.switching import Switch, all_switches, days_of_use, switched
from reliability.kept import key_of
from reliability.models import KeptResult

KIND = "order list"
KEPT_FOR = dt.timedelta(days=3)

Document = dict[str, Any]


def order_document(
    currency: str,
    *,
    assumed: Iterable[Switch] = (),
    service_level: float | None = None,
    count: bool = True,
) -> Document:
    """Today's list; what is not counted yet is counted now, or left out. A list with assumptions is not kept."""
    today, told = timezone.localdate(), list(assumed)
    components = list(Component.objects.all())
    uses = kept_uses(components, count=count)
    # what is not counted yet is not told apart from what cannot be: such a list is not kept
    usual = not told and service_level is None and len(uses) == len(components)
    before = last_document(today) if usual else None
    document = made(today, uses, told, rules(today, service_level=service_level), currency, before)
    if usual and (before is None or before != document):
        keep(today, document)
    return document


def last_document(today: dt.date | None = None) -> Document | None:
    """Today's list as it was last made, without looking whether anything moved since; None if there is none."""
    row = KeptResult.objects.filter(kind=KIND, key=key_of({"today": today or timezone.localdate()})).first()
    return None if row is None else dict(json.loads(bytes(row.payload)))


def earlier_document() -> Document | None:
    """The list of the last day before today that is still kept."""
    today = timezone.localdate()
    days = (today - dt.timedelta(days=back) for back in range(1, KEPT_FOR.days + 1))
    return next((found for day in days if (found := last_document(day)) is not None), None)


def keep(today: dt.date, document: Document) -> None:
    text = json.dumps(document, allow_nan=False, separators=(",", ":"))
    KeptResult.objects.filter(kind=KIND, made_at__lt=timezone.now() - KEPT_FOR).delete()
    KeptResult.objects.update_or_create(
        kind=KIND,
        key=key_of({"today": today}),
        defaults={"data_version": DataVersion.current(), "payload": text.encode(), "made_at": timezone.now()},
    )


def made(
    today: dt.date,
    uses: dict[str, ComingUse],
    assumed: Sequence[Switch],
    asked: Rules,
    currency: str,
    before: Document | None,
) -> Document:
    """As plain values: lines with their reasons in words, cost, and which components could not be counted."""
    switches = all_switches(uses, assumed)
    untried = [code for code, use in uses.items() if use.known and use.failures_seen == 0]
    listed = shelves(today, [part for use in uses.values() for part in use.used], days_of_use(switches), untried)
    lines = lines_of(listed, uses, switches, asked, before)
    lines.sort(
        key=lambda line: (not line["quantity"], line["tell_on"] or "9", -line["chance_if_nothing"], line["part"])
    )
    ordered = [line for line in lines if line["quantity"]]
    cost = sum((Decimal(line["cost"]) for line in ordered if line["cost"] is not None), Decimal(0))
    missing = tuple(line["part"] for line in ordered if line["cost"] is None)
    counted_at = min((use.counted_at for use in uses.values()), default=timezone.now())
    return {
        "as_of": today.isoformat(),
        "sentence": order_sentence(len(ordered), cost, missing, currency),
        "currency": currency,
        "counted_at": counted_at.isoformat(),
        "current": all(use.current for use in uses.values()),
        "unknown": sorted(code for code, use in uses.items() if not use.known),
        "switches": [switch_told(each) for each in switches],
        "lines": lines,
        "cost": str(cost),
        "without_price": list(missing),
    }


def lines_of(
    listed: Sequence[Shelf],
    uses: dict[str, ComingUse],
    switches: Sequence[Switch],
    asked: Rules,
    before: Document | None,
) -> list[Document]:
    """Each part's line; those whose state is as before are taken from there."""
    components = dict(Part.objects.values_list("code", "component__code"))
    kept = {line["part"]: line for line in before["lines"]} if before is not None else {}
    states = {shelf.part: state_of(shelf, uses.get(components[shelf.part]), switches, asked) for shelf in listed}
    new = [shelf for shelf in listed if kept.get(shelf.part, {}).get("state") != states[shelf.part]]
    wanted = {components[shelf.part] for shelf in new}
    use = switched([each for code, each in uses.items() if code in wanted], switches_of(switches, wanted))
    fresh = {shelf.part: line_told(order_line(shelf, use.get(shelf.part), asked), asked.today) for shelf in new}
    return [
        {**fresh[shelf.part], "component": components[shelf.part], "state": states[shelf.part]}
        if shelf.part in fresh
        else kept[shelf.part]
        for shelf in listed
    ]


def switches_of(switches: Iterable[Switch], components: set[str]) -> list[Switch]:
    return [each for each in switches if each.component in components]


def state_of(shelf: Shelf, use: ComingUse | None, switches: Sequence[Switch], asked: Rules) -> str:
    """The same as long as nothing of the part moved, came, was ordered, was counted anew or set otherwise."""
    counted = "" if use is None else use.counted_at.isoformat()
    mine = [asdict(each) for each in switches if use is not None and each.component == use.component]
    return key_of({"shelf": asdict(shelf), "rules": asdict(asked), "counted": counted, "switches": mine})[:24]


def line_told(line: OrderLine, today: dt.date) -> Document:
    below = line.quantity > 0 and (not line.known or line.on_hand + line.due <= line.reorder_level)
    return {**line.document(), "reasons": reasons(line, today), "below": below}


def switch_told(each: Switch) -> Document:
    return {
        "component": each.component,
        "old": each.old,
        "new": each.new,
        "planned": each.planned,
        "until": None if each.until is None else each.until.isoformat(),
        "pieces": sum(each.pieces),
    }
