"""moves.csv: the ledger of stock. A transfer is one row; quantities are signed as the store sees them."""

from __future__ import annotations

from fleet.models import Condition, MoveKind, StockMove
from fleet.models.codes import natural_key
from fleet.models.supply import MOST_PIECES
from fleet.transfer import cells
from fleet.transfer.columns import Column, FileKind
from fleet.transfer.kinds.belongings import settle_visit
from fleet.transfer.known import Known
from fleet.transfer.row import Row

SIGNS = {
    MoveKind.RECEIPT: "more than 0: what came in",
    MoveKind.ISSUE: "less than 0: what went out",
    MoveKind.SCRAP: "less than 0: what was thrown away",
    MoveKind.TRANSFER: "not 0: less than 0 goes out to the other store",
}


def finish(row: Row, known: Known) -> None:
    row["code_order"] = natural_key(row["code"] or "")
    known.check_past(row, "happened_on", "happened_on")
    check_sign(row)
    check_ends(row)
    settle_visit(row, known, "visit", "visit_id", None)
    settle_line(row, known)
    kind = row["kind"]
    if kind is not None and kind != MoveKind.ISSUE:
        for column, to in (("visit", "visit_id"), ("job", "job_id")):
            if row[to] is not None:
                row.say(column, f"is given, yet this is a {kind}: only issues go to one. Leave it empty.")
    if row["visit_id"] is not None and row["job_id"] is not None:
        row.say("job", "and visit are both given. A part goes to one of the two: leave one empty.")
    job = known.job_by_id(row["job_id"]) if row["job_id"] is not None else None
    if job is not None:
        row.not_before("happened_on", "happened_on", job.received_on, "the day the job began")
        row.not_after("happened_on", "happened_on", job.finished_on, "the day the job was finished")


def check_sign(row: Row) -> None:
    kind, quantity = row["kind"], row["quantity"]
    if kind is None or quantity is None:
        return
    wrong = {
        MoveKind.RECEIPT: quantity <= 0,
        MoveKind.ISSUE: quantity >= 0,
        MoveKind.SCRAP: quantity >= 0,
        MoveKind.TRANSFER: quantity == 0,
    }
    if wrong.get(kind):
        row.say("quantity", f"cannot be that of a {kind}. Write a number that is {SIGNS[kind]}.")


def check_ends(row: Row) -> None:
    if row["kind"] == MoveKind.TRANSFER and row["other_store_id"] is None and "other_store" not in row.given:
        row.say("other_store", "is missing: a transfer has two ends. Enter the other store.")
    elif row["kind"] not in (None, MoveKind.TRANSFER) and row["other_store_id"] is not None:
        row.say("other_store", f"is given, yet this is a {row['kind']}. Leave it empty, or write transfer.")
    elif row["other_store_id"] is not None and row["other_store_id"] == row["store_id"]:
        row.say("other_store", "is the store itself. Name the other end of the transfer.")


def settle_line(row: Row, known: Known) -> None:
    """From the order's code and the part to the line of the order."""
    code = row.values.pop("line_code", None)
    row["line_id"] = None
    if code is None or row["part_id"] is None:
        return
    if row["kind"] not in (None, MoveKind.RECEIPT):
        row.say("order", f"is given, yet this is a {row['kind']}: only receipts come of one. Leave it empty.")
        return
    line = known.line(code, row["part_id"])
    if line is None:
        row.say("order", "has no line of this part. Add it to supply.csv, or leave it empty.")
        return
    row["line_id"] = line.id
    row.not_before("happened_on", "happened_on", line.ordered_on, "the day it was ordered")


MOVES = FileKind(
    name="moves",
    model=StockMove,
    noun="move",
    columns=(
        Column("move", "code", cells.code, required=True),
        Column("store", "store_id", cells.code, required=True, refers="store"),
        Column("part", "part_id", cells.code, required=True, refers="part"),
        Column("happened_on", "happened_on", cells.day, required=True),
        Column("quantity", "quantity", cells.whole(-MOST_PIECES, MOST_PIECES), required=True),
        Column("kind", "kind", cells.one_of(*MoveKind.values), required=True),
        Column("other_store", "other_store_id", cells.code, refers="store"),
        Column("visit", "visit_code", cells.code),
        Column("job", "job_id", cells.code, refers="job"),
        Column("order", "line_code", cells.code),
        Column("condition", "condition", cells.one_of(*Condition.values), empty=Condition.NEW.value),
        Column("reason", "reason", cells.text_up_to(500), empty=""),
    ),
    key=("code",),
    key_columns=("move",),
    derived=("code_order", "visit_id", "line_id"),
    finish=finish,
)
