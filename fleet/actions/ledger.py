"""Posting to the ledger of stock: balances are locked first, so that two who issue the last part wait in turn."""

from __future__ import annotations

import datetime as dt
import uuid
from collections.abc import Callable, Iterable
from typing import Any

from django.utils import timezone

from fleet.actions.base import change, once, sees
from fleet.actions.checks_values import choose, clean_number, need_day
from fleet.actions.errors import BadValue, NotAllowed, NotEnough, day_words
from fleet.actions.strike import strike
from fleet.actions.writes import add
from fleet.models import Book, Condition, MoveKind, Part, Person, StockBalance, StockMove, Store
from fleet.models.zones import zone
from fleet.rights import STOCK

Key = tuple[int, int, str]  # store, part, condition


def today_at(store: Store) -> dt.date:
    here = store.site.tz if store.site is not None else zone(Book.load().zone)
    return timezone.now().astimezone(here).date()


def check_store(store: Store, by: Person | None, *, field: str = "store") -> None:
    if by is not None and not sees(by, store):
        raise NotAllowed(f"Store {store.code} is none of yours. Choose a store of yours.", field=field)


def pieces(quantity: Any, *, field: str = "quantity") -> int:
    """A whole number of at least one."""
    column = StockMove._meta.get_field("quantity")
    count = int(clean_number(quantity, column))
    if count < 1:
        raise BadValue("Less than one piece is no move. Enter how many, from 1 up.", field=field)
    return count


def moved_on(store: Store, day: dt.date | None) -> dt.date:
    """Today at the store unless another day is said."""
    today = today_at(store)
    return today if day is None else need_day(day, field="happened_on", today=today)


def effects(move: StockMove) -> dict[Key, int]:
    """What a move adds at each store."""
    found: dict[Key, int] = {(move.store_id, move.part_id, move.condition): move.quantity}
    if move.other_store_id is not None:
        found[move.other_store_id, move.part_id, move.condition] = -move.quantity
    return found


def locked_balances(keys: Iterable[Key]) -> dict[Key, StockBalance]:
    """Always in the same order, so that two writers cannot wait for each other crosswise."""
    found = {}
    for store, part, condition in sorted(set(keys)):
        named: dict[str, Any] = {"store_id": store, "part_id": part, "condition": condition}
        StockBalance.objects.get_or_create(**named)
        found[store, part, condition] = StockBalance.objects.select_for_update(of=("self",)).get(**named)
    return found


def post(move: StockMove, *, by: Person | None, code: str | None = None) -> StockMove:
    """Inside a change: refuses what would leave less than nothing, then writes the move and its balances."""
    choose(move.condition, Condition, field="condition", blank=False)
    move.entered_by = by
    balances = locked_balances(effects(move))
    apply(move, balances, sign=1)
    add(move, code=code, prefix="SM")
    if move.kind == MoveKind.COUNT:
        note_count(move, balances)
    return move


def post_once(
    make: Callable[[], StockMove],
    *,
    by: Person | None,
    verb: str,
    said: Any,
    entry_key: uuid.UUID | None,
    code: str | None,
) -> StockMove:
    """One move by who may move stock, all of it or nothing; the same submission again gives the move of before."""
    with (
        change(by=by, right=STOCK, raises_version=False),
        once(entry_key, by=by, verb=verb, said=said) as answer,
    ):
        if "move" in answer:
            return StockMove.objects.get(pk=answer["move"])
        move = post(make(), by=by, code=code)
        answer["move"] = move.pk
    return move


def apply(move: StockMove, balances: dict[Key, StockBalance], *, sign: int) -> None:
    for key, quantity in effects(move).items():
        balance = balances[key]
        added = sign * quantity
        if added < 0 and balance.on_hand + added < 0:
            store = move.store if key[0] == move.store_id else move.other_store
            assert store is not None
            if not store.may_go_below_zero:
                raise NotEnough(
                    store=store.title, part=move.part.code, on_hand=balance.on_hand, asked=-added, used=key[2] == "used"
                )
        balance.on_hand += added
        balance.changes += 1
        balance.save()


def note_count(move: StockMove, balances: dict[Key, StockBalance]) -> None:
    for balance in balances.values():
        balance.counted_on = max(move.happened_on, balance.counted_on or move.happened_on)
        balance.save()


def take_back(move: StockMove, by: Person | None, reason: str) -> StockMove:
    """A wrong move is struck out; what it did to its stores is undone."""
    balances = locked_balances(effects(move))
    apply(move, balances, sign=-1)
    strike(move, by, reason)
    if move.kind == MoveKind.COUNT:
        for (store, part, condition), balance in balances.items():
            counts = StockMove.objects.standing().filter(kind=MoveKind.COUNT, store=store, part=part)
            last = counts.filter(condition=condition).order_by("-happened_on").first()
            balance.counted_on = last and last.happened_on
            balance.save()
    return move


def not_before(day: dt.date, first: dt.date, words: str, *, field: str = "happened_on") -> None:
    if day < first:
        raise BadValue(
            f"{day_words(day)} lies before {words} on {day_words(first)}. Enter a day from then on.", field=field
        )


def fresh_part(part: Part | None) -> Part:
    if part is None:
        raise BadValue("The part is missing. Choose one.", field="part")
    return part
