"""supply.csv: what was ordered, a line a part. Deliveries are receipts in moves.csv."""

from __future__ import annotations

from fleet.models import SupplyLine
from fleet.models.supply import MOST_PIECES
from fleet.transfer import cells
from fleet.transfer.columns import Column, FileKind
from fleet.transfer.known import Known
from fleet.transfer.row import Row


def finish(row: Row, known: Known) -> None:
    code = row.values.pop("order_code", None)
    row["order_id"] = None
    known.check_past(row, "ordered_on", "ordered_on")
    row.not_too_far("due_on")
    row.not_before("due_on", "due_on", row["ordered_on"], "the day it was ordered")
    if code is not None and row["ordered_on"] is not None:
        settle_order(row, known, code)
    if row["ordered_on"] is not None:
        row["ordered_on"] = row["ordered_on"].isoformat()


def settle_order(row: Row, known: Known, code: str) -> None:
    """All lines of an order say the same supplier and day; the first one tells, for a new order."""
    row["order_id"], supplier, ordered_on = known.order(code, row["supplier"], row["ordered_on"])
    for column, said, other in (("supplier", row["supplier"], supplier), ("ordered_on", row["ordered_on"], ordered_on)):
        # An order of the book may be corrected by an update; the lines of one file must agree.
        if said != other and row["order_id"] < 0:
            row.say(column, f"differs from an earlier line of order {code}, which has “{other}”. Correct one of them.")


SUPPLY = FileKind(
    name="supply",
    model=SupplyLine,
    noun="line",
    columns=(
        Column("order", "order_code", cells.code, required=True),
        Column("part", "part_id", cells.code, required=True, refers="part"),
        Column("quantity", "quantity", cells.whole(1, MOST_PIECES), required=True),
        Column("ordered_on", "ordered_on", cells.day, required=True),
        Column("due_on", "due_on", cells.day),
        Column("supplier", "supplier", cells.text_up_to(120), empty=""),
        Column("unit_cost", "unit_cost", cells.money),
    ),
    key=("order_id", "part_id"),
    key_columns=("order", "part"),
    derived=("order_id",),
    extra={"supplier": "text", "ordered_on": "text"},
    finish=finish,
)
