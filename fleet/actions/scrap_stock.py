"""Parts are thrown away from a store."""

from __future__ import annotations

import datetime as dt
import uuid

from fleet.actions.base import change, once
from fleet.actions.checks_values import clean_text
from fleet.actions.errors import BadValue
from fleet.actions.ledger import check_store, fresh_part, moved_on, pieces, post
from fleet.models import Condition, MoveKind, Part, Person, StockMove, Store
from fleet.rights import STOCK


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
    said = (store, part, quantity, reason, happened_on, condition, code)
    with (
        change(by=by, right=STOCK, raises_version=False),
        once(entry_key, by=by, verb="scrap_stock", said=said) as answer,
    ):
        if "move" in answer:
            return StockMove.objects.get(pk=answer["move"])
        check_store(store, by)
        reason = clean_text(reason, field="reason", longest=500, words="The reason")
        if not reason:
            raise BadValue("The reason is missing. Say in a few words why they are thrown away.", field="reason")
        move = StockMove(
            store=store, part=fresh_part(part), quantity=-pieces(quantity), kind=MoveKind.SCRAP,
            happened_on=moved_on(store, happened_on), condition=condition, reason=reason,
        )  # fmt: skip
        post(move, by=by, code=code)
        answer["move"] = move.pk
    return move
