"""What the rows of moves.csv, supply.csv and hours.csv add up to, with the book; and the balances made from it."""

from __future__ import annotations

from typing import Any

from fleet.models import StockBalance, StockMove, Store
from fleet.transfer.columns import FileKind
from fleet.transfer.job import Job
from fleet.transfer.staging import fetch, index_stage, on_sqlite, run, stage_exists
from fleet.transfer.writing_sql import Numbers

MOVES, BALANCES, STORES = StockMove._meta.db_table, StockBalance._meta.db_table, Store._meta.db_table
# Each move seen from both of its ends.
ENDS = """
SELECT id, store_id, part_id, condition, quantity{more} FROM {table} {where}
UNION ALL
SELECT id, other_store_id, part_id, condition, -quantity{more} FROM {table} {where} AND other_store_id IS NOT NULL
"""
BOOK_OF_KEYS = (
    "WHERE struck_out = '' AND part_id IN (SELECT part_id FROM stage_moves WHERE part_id > 0) "
    "AND NOT EXISTS (SELECT 1 FROM stage_moves AS mine WHERE mine.id = {table}.id)"
)


def ends(table: str, where: str, more: str = "") -> str:
    return ENDS.format(table=table, where=where, more=more)


def note_touched_stock(kinds: list[FileKind]) -> None:
    """The stores and parts of the book that the files' moves add to or change."""
    run("DROP TABLE IF EXISTS touched_stock")
    run(
        "CREATE TEMPORARY TABLE touched_stock (store_id bigint, part_id bigint, condition varchar(4), "
        "PRIMARY KEY (store_id, part_id, condition))"
    )
    if not any(kind.name == "moves" for kind in kinds):
        return
    staged = ends("stage_moves", "WHERE store_id IS NOT NULL AND part_id IS NOT NULL AND condition IS NOT NULL")
    book = ends(MOVES, "WHERE id IN (SELECT id FROM stage_moves WHERE id > 0)")
    run(
        "INSERT INTO touched_stock SELECT DISTINCT store_id, part_id, condition "
        f"FROM ({staged} UNION ALL {book}) AS ends WHERE store_id > 0 AND part_id > 0"
    )


def stock_signature() -> list[Any]:
    """Goes up with every move at one of these stores."""
    return fetch(
        f"SELECT COALESCE(SUM(changes), 0) FROM {BALANCES} AS book WHERE EXISTS (SELECT 1 FROM touched_stock AS mine "
        "WHERE mine.store_id = book.store_id AND mine.part_id = book.part_id AND mine.condition = book.condition)"
    )


def hold_stock_still() -> None:
    """On PostgreSQL the balances are locked in the order of the actions."""
    if on_sqlite():
        return
    make_missing_balances()
    run(
        f"SELECT id FROM {BALANCES} AS book WHERE EXISTS (SELECT 1 FROM touched_stock AS mine WHERE "
        "mine.store_id = book.store_id AND mine.part_id = book.part_id AND mine.condition = book.condition) "
        "ORDER BY store_id, part_id, condition FOR UPDATE"
    )


def make_missing_balances() -> None:
    run(
        f"INSERT INTO {BALANCES} (store_id, part_id, condition, on_hand, changes) "
        "SELECT store_id, part_id, condition, 0, 0 FROM touched_stock WHERE store_id > 0 ON CONFLICT DO NOTHING"
    )


def write_balances(kind: FileKind, last_row: int, numbers: Numbers) -> None:
    """Last: the balances of all stores and parts that gained or lost something."""
    if last_row:
        base = numbers.base[kind.table]
        fresh = ends(MOVES, f"WHERE id > {base} AND id <= {base + last_row}")
        run(f"INSERT INTO touched_stock SELECT DISTINCT store_id, part_id, condition FROM ({fresh}) AS ends "
            "WHERE TRUE ON CONFLICT DO NOTHING")  # fmt: skip
    changed = ends(MOVES, "WHERE id IN (SELECT id FROM stage_moves WHERE differs = 1)")
    run(f"INSERT INTO touched_stock SELECT DISTINCT store_id, part_id, condition FROM ({changed}) AS ends "
        "WHERE TRUE ON CONFLICT DO NOTHING")  # fmt: skip
    make_missing_balances()
    same = "move.part_id = book.part_id AND move.condition = book.condition AND move.struck_out = ''"
    run(
        f"UPDATE {BALANCES} AS book SET changes = changes + 1, "
        f"on_hand = (SELECT COALESCE(SUM(move.quantity), 0) FROM {MOVES} AS move "
        f"WHERE move.store_id = book.store_id AND {same}) - (SELECT COALESCE(SUM(move.quantity), 0) "
        f"FROM {MOVES} AS move WHERE move.other_store_id = book.store_id AND {same}), "
        f"counted_on = (SELECT MAX(move.happened_on) FROM {MOVES} AS move WHERE move.store_id = book.store_id "
        f"AND move.kind = 'count' AND {same}) "
        "WHERE EXISTS (SELECT 1 FROM touched_stock AS mine WHERE mine.store_id = book.store_id "
        "AND mine.part_id = book.part_id AND mine.condition = book.condition)"
    )


# --- checks


def check_moves(kind: FileKind, job: Job) -> None:
    index_stage(kind, "id")
    check_below_zero(kind, job)
    check_received(job)


def check_below_zero(kind: FileKind, job: Job) -> None:
    """No store ends below zero unless it may; the last move that takes something out of it is named."""
    staged = ends("stage_moves", "WHERE bad = 0", ", row")
    book = ends(MOVES, BOOK_OF_KEYS.format(table=MOVES), ", NULL AS row")
    short = fetch(
        f"SELECT store_id, part_id, condition, SUM(quantity), MAX(CASE WHEN quantity < 0 THEN row END), MAX(row) "
        f"FROM ({staged} UNION ALL {book}) AS ends WHERE store_id IS NOT NULL AND part_id IS NOT NULL "
        "GROUP BY store_id, part_id, condition HAVING SUM(quantity) < 0 AND MAX(row) IS NOT NULL ORDER BY MAX(row)"
    )
    allowed = stores_below_zero()
    for store, _, condition, left, taker, last in short:
        if store in allowed:
            continue
        words = " of used ones" if condition == "used" else ""
        job.say(
            kind, taker or last, "quantity", "",
            f"leaves {left}{words} at this store in the end. Correct the quantity, add the receipt that is missing, "
            "or let the store go below zero.",
        )  # fmt: skip


def stores_below_zero() -> set[int]:
    allowed = set(Store.objects.filter(may_go_below_zero=True).values_list("pk", flat=True))
    if stage_exists("stage_stores"):
        for pk, may in fetch("SELECT id, may_go_below_zero FROM stage_stores"):
            allowed = allowed | {pk} if may else allowed - {pk}
    return allowed


def check_received(job: Job) -> None:
    """No line gets more than was ordered, by whichever of the two files."""
    named, came, lines = [], [], "SELECT id, quantity, NULL AS row FROM fleet_supplyline"
    book = f"SELECT line_id, quantity, NULL AS row FROM {MOVES} AS book WHERE struck_out = '' AND line_id IS NOT NULL"
    if stage_exists("stage_moves"):
        named.append("SELECT line_id FROM stage_moves WHERE line_id IS NOT NULL")
        came.append("SELECT line_id, quantity, row FROM stage_moves WHERE bad = 0 AND line_id IS NOT NULL")
        book += " AND NOT EXISTS (SELECT 1 FROM stage_moves AS mine WHERE mine.id = book.id)"
    if stage_exists("stage_supply"):
        named.append("SELECT id FROM stage_supply WHERE bad = 0")
        lines += " WHERE id NOT IN (SELECT id FROM stage_supply WHERE id > 0)"
        lines = f"SELECT id, quantity, row FROM stage_supply WHERE bad = 0 UNION ALL {lines}"
    touched = " UNION ".join(named)
    over = fetch(
        f"SELECT MAX(came.row), MAX(lines.row), MAX(lines.quantity), SUM(came.quantity) "
        f"FROM ({' UNION ALL '.join([*came, book])}) AS came JOIN ({lines}) AS lines ON lines.id = came.line_id "
        f"WHERE came.line_id IN ({touched}) GROUP BY came.line_id "
        "HAVING SUM(came.quantity) > MAX(lines.quantity) ORDER BY 1, 2"
    )
    kinds = {kind.name: kind for kind in job.kinds}
    for move, line, ordered, sum_of_moves in over:
        kind, row = (kinds["moves"], move) if move is not None else (kinds["supply"], line)
        message = f"makes {sum_of_moves} received of {ordered} ordered. Correct the delivery or the order."
        job.say(kind, row, "quantity", "", message)


def check_hours(kind: FileKind, job: Job) -> None:
    """Nobody works more than 24 hours on a day."""
    for row, booked in fetch(
        f"SELECT MAX(row), SUM(hours) FROM (SELECT person_id, day, hours, row FROM {kind.stage} WHERE bad = 0 "
        f"UNION ALL SELECT person_id, day, hours, NULL FROM {kind.table} AS book WHERE struck_out = '' "
        f"AND NOT EXISTS (SELECT 1 FROM {kind.stage} AS mine WHERE mine.id = book.id)) AS booked "
        "GROUP BY person_id, day HAVING SUM(hours) > 24.000000001 AND MAX(row) IS NOT NULL ORDER BY MAX(row)"
    ):
        job.say(kind, row, "hours", "", f"makes {booked:g} hours of this person on that day. Correct the hours.")
