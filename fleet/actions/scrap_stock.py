"""Parts are thrown away from a store."""

from __future__ import annotations

import datetime as dt
import uuid

from fleet.actions.checks_values import clean_text
from fleet.actions.errors import BadValue
from fleet.actions.ledger import check_store, fresh_part, moved_on, pieces, post_once
from fleet.models import Condition, MoveKind, Part, Person, StockMove, Store


def scrap_stock(
    *,
    by: Person | None,
    store: Store,
    part: Part,
    quantity: int,
    reason: str,
    happened_on: dt.date | None = None,
    condition: str = Condition.NEW,
    entry_key: uuid.UUID | None = None,
    code: str | None = None,
) -> StockMove:

    def move() -> StockMove:
        check_store(store, by)
        why = clean_text(reason, field="reason", longest=500, words="The reason")
        if not why:
            raise BadValue("The reason is missing. Say in a few words why they are thrown away.", field="reason")
        return StockMove(
            store=store, part=fresh_part(part), quantity=-pieces(quantity), kind=MoveKind.SCRAP,
            happened_on=moved_on(store, happened_on), condition=condition, reason=why,
        )  # fmt: skip

    said = (store, part, quantity, reason, happened_on, condition, code)
    return post_once(move, by=by, verb="scrap_stock", said=said, entry_key=entry_key, code=code)
