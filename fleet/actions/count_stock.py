"""Somebody counted what lies on the shelf: the difference is posted, with its reason."""

from __future__ import annotations

import uuid
from typing import Any

from fleet.actions.checks_values import clean_number, clean_text
from fleet.actions.errors import BadValue, ChangedCount
from fleet.actions.ledger import check_store, fresh_part, locked_balances, post_once, today_at
from fleet.formats import counted as in_words
from fleet.models import Condition, MoveKind, Part, Person, StockMove, Store


def count_stock(
    *,
    by: Person | None,
    store: Store,
    part: Part,
    counted: int,
    reason: str = "",
    expected: int | None = None,
    condition: str = Condition.NEW,
    entry_key: uuid.UUID | None = None,
    code: str | None = None,
) -> StockMove:
    """`expected` is what the book showed when the counting began: if it moved meanwhile, the count is made again.

    A count that agrees is kept too, with a difference of nothing: it says when somebody last looked.
    """

    def move() -> StockMove:
        check_store(store, by)
        count = whole(counted)
        why = clean_text(reason, field="reason", longest=500, words="The reason")
        key = (store.pk, fresh_part(part).pk, condition)
        on_hand = locked_balances([key])[key].on_hand
        if expected is not None and expected != on_hand:
            raise ChangedCount(part=part.code, expected=expected, on_hand=on_hand)
        difference = count - on_hand
        if difference and not why:
            raise BadValue(
                f"{in_words(count, 'piece')} counted, {on_hand} on record. Say in a few words where the difference "
                "comes from, or that nobody knows.",
                field="reason",
            )
        return StockMove(
            store=store, part=part, quantity=difference, kind=MoveKind.COUNT, happened_on=today_at(store),
            condition=condition, reason=why,
        )  # fmt: skip

    said = (store, part, counted, reason, condition, code)
    return post_once(move, by=by, verb="count_stock", said=said, entry_key=entry_key, code=code)


def whole(counted: Any) -> int:
    count = int(clean_number(counted, StockMove._meta.get_field("quantity")))
    if count < 0:
        raise BadValue("Less than nothing cannot lie on a shelf. Enter the number counted, 0 or more.", field="counted")
    return count
