"""Parts come into a store, from a supply order or otherwise."""

from __future__ import annotations

import datetime as dt
import uuid
from collections.abc import Mapping

from fleet.actions.base import change, once
from fleet.actions.errors import BadValue, RecordError
from fleet.actions.ledger import check_store, fresh_part, locked_balances, moved_on, not_before, pieces, post_once
from fleet.formats import counted
from fleet.models import Condition, MoveKind, Part, Person, StockMove, Store, SupplyLine
from fleet.rights import STOCK


def receive_stock(
    *,
    by: Person | None,
    store: Store,
    quantity: int,
    part: Part | None = None,
    line: SupplyLine | None = None,
    happened_on: dt.date | None = None,
    condition: str = Condition.NEW,
    reason: str = "",
    entry_key: uuid.UUID | None = None,
    code: str | None = None,
) -> StockMove:
    """Against a line of a supply order never more than is still to come."""

    def move() -> StockMove:
        check_store(store, by)
        move = StockMove(
            store=store, part=part, kind=MoveKind.RECEIPT, condition=condition, reason=reason,
            quantity=pieces(quantity), happened_on=moved_on(store, happened_on),
        )  # fmt: skip
        if line is not None:
            take_from_line(move, line)
        fresh_part(move.part if move.part_id else None)
        return move

    said = (store, quantity, part, line, happened_on, condition, reason, code)
    return post_once(move, by=by, verb="receive_stock", said=said, entry_key=entry_key, code=code)


def receive_delivery(
    *,
    by: Person | None,
    store: Store,
    quantities: Mapping[SupplyLine, int],
    happened_on: dt.date | None = None,
    reason: str = "",
    entry_key: uuid.UUID | None = None,
) -> list[StockMove]:
    """One delivery against several lines of an order: all of it, or nothing."""
    said = (store, {line.pk: count for line, count in quantities.items()}, happened_on, reason)
    with (
        change(by=by, right=STOCK, raises_version=False),
        once(entry_key, by=by, verb="receive_delivery", said=said) as answer,
    ):
        if "moves" in answer:
            return list(StockMove.objects.filter(pk__in=answer["moves"]).order_by("pk"))
        if not quantities:
            raise BadValue("Nothing was received. Enter how many came of at least one part.")
        moves = []
        lock_delivery(store, quantities)
        for line in sorted(quantities, key=lambda line: line.pk):
            try:
                moves.append(receive_stock(by=by, store=store, line=line, quantity=quantities[line],
                                           happened_on=happened_on, reason=reason))  # fmt: skip
            except RecordError as error:
                error.data["line"] = line.pk
                raise
        answer["moves"] = [move.pk for move in moves]
    return moves


def lock_delivery(store: Store, quantities: Mapping[SupplyLine, int]) -> None:
    """Lines in one order, and all of them before any balance: two deliveries cannot wait for each other crosswise."""
    lines = SupplyLine.objects.filter(pk__in=[line.pk for line in quantities]).order_by("pk")
    parts = lines.select_for_update(of=("self",), no_key=True).values_list("part_id", flat=True)
    locked_balances((store.pk, part, Condition.NEW) for part in parts)


def take_from_line(move: StockMove, line: SupplyLine) -> None:
    """Under the line's lock: of two people who receive the same delivery the second is told."""
    locked = SupplyLine.objects.select_for_update(of=("self",), no_key=True).get(pk=line.pk)
    if move.part_id not in (None, locked.part_id):
        raise BadValue(f"The line is of {locked.part.code}. Choose that part, or another line.", field="part")
    move.part, move.line = locked.part, locked
    order = locked.order
    if locked.struck_out:
        raise BadValue(f"{locked.part.code} was taken off order {order.code}: {locked.struck_out}.", field="line")
    not_before(move.happened_on, order.ordered_on, f"order {order.code} was placed")
    due = max(0, SupplyLine.objects.with_received().get(pk=locked.pk).due)
    if move.quantity > due:
        still = counted(due, "is", "are") if due else "none is"
        raise BadValue(
            f"Of {locked.part.code}, {still} still to come on order {order.code}, and {move.quantity} were entered. "
            "Enter what came of this order; change the line if more came, or receive the rest without an order.",
            field="quantity",
            due=due,
        )
