"""Makes the derived balances of stock again from the ledger, and tells where they had differed."""

from __future__ import annotations

from collections import defaultdict
from typing import Any

from django.db import transaction
from django.db.models import Max, Q, Sum

from fleet.actions.ledger import Key, locked_balances
from fleet.models import MoveKind, StockBalance, StockMove


def ledger_sums() -> dict[Key, int]:
    """On hand by store, part and condition, straight from the moves."""
    sums: dict[Key, int] = defaultdict(int)
    standing = StockMove.objects.standing().order_by()
    for name, sign in (("store", 1), ("other_store", -1)):
        rows = standing.exclude(**{name: None}).values_list(name, "part", "condition").annotate(n=Sum("quantity"))
        for store, part, condition, quantity in rows:
            sums[store, part, condition] += sign * quantity
    return dict(sums)


def wrong_balances() -> dict[Key, tuple[int, int]]:
    """(balance, sum of moves) where the two differ: none, unless somebody wrote past the actions."""
    sums = ledger_sums()
    kept = {
        (store, part, condition): on_hand
        for store, part, condition, on_hand in StockBalance.objects.values_list(
            "store_id", "part_id", "condition", "on_hand"
        )
    }
    return {key: (kept.get(key, 0), sums.get(key, 0)) for key in {*sums, *kept} if kept.get(key, 0) != sums.get(key, 0)}


def rebuild_balances() -> dict[Key, tuple[int, int]]:
    """Leaves every balance as the ledger says; returns those that were wrong."""
    with transaction.atomic():
        locked_balances(wrong_balances())
        wrong = wrong_balances()  # as they are under the locks
        for key, balance in locked_balances(wrong).items():
            balance.on_hand = wrong[key][1]
            balance.changes += 1
            balance.counted_on = last_count(key)
            balance.save()
    return wrong


def last_count(key: Key) -> Any:
    store, part, condition = key
    counts = Q(store=store, part=part, condition=condition, kind=MoveKind.COUNT)
    return StockMove.objects.standing().filter(counts).aggregate(last=Max("happened_on"))["last"]
