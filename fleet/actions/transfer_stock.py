"""Parts go from one store to another: one row, and nothing is lost between the two."""

from __future__ import annotations

import datetime as dt
import uuid

from fleet.actions.errors import BadValue
from fleet.actions.ledger import check_store, fresh_part, moved_on, pieces, post_once
from fleet.models import Condition, MoveKind, Part, Person, StockMove, Store


def transfer_stock(
    *,
    by: Person | None,
    store: Store,
    other_store: Store,
    part: Part,
    quantity: int,
    happened_on: dt.date | None = None,
    condition: str = Condition.NEW,
    reason: str = "",
    entry_key: uuid.UUID | None = None,
    code: str | None = None,
) -> StockMove:
    """Out of `store`, into `other_store`."""

    def move() -> StockMove:
        check_store(store, by)
        check_store(other_store, by, field="other_store")
        if store.pk == other_store.pk:
            raise BadValue(f"{store.title} is both ends of this transfer. Choose another store.", field="other_store")
        return StockMove(
            store=store, other_store=other_store, part=fresh_part(part), quantity=-pieces(quantity),
            kind=MoveKind.TRANSFER, happened_on=moved_on(store, happened_on), condition=condition, reason=reason,
        )  # fmt: skip

    said = (store, other_store, part, quantity, happened_on, condition, reason, code)
    return post_once(move, by=by, verb="transfer_stock", said=said, entry_key=entry_key, code=code)
