"""Reserves record numbers, so that rows which refer to each other are complete before they are stored."""

from __future__ import annotations

from django.db import connection, transaction

from fleet.transfer.staging import fetch, on_sqlite, run, value_of

IMPORTS = 7_041_982  # key of the advisory lock: two reservations at one moment would give numbers twice
MARGIN = 1000  # for rows that others add between the two statements


def reserve(table: str, count: int) -> int:
    """The number after which `count` numbers are free for the caller, for ever."""
    with transaction.atomic():
        return reserve_on_sqlite(table, count) if on_sqlite() else reserve_on_postgresql(table, count)


def reserve_on_sqlite(table: str, count: int) -> int:
    name = connection.ops.quote_name(table)
    used = value_of(f"SELECT COALESCE(MAX(id), 0) FROM {name}")
    kept = fetch("SELECT seq FROM sqlite_sequence WHERE name = %s", [table])
    last = max(int(used), int(kept[0][0]) if kept else 0)
    if kept:
        run("UPDATE sqlite_sequence SET seq = %s WHERE name = %s", [last + count, table])
    else:
        run("INSERT INTO sqlite_sequence (name, seq) VALUES (%s, %s)", [table, last + count])
    return last


def reserve_on_postgresql(table: str, count: int) -> int:
    run("SELECT pg_advisory_xact_lock(%s)", [IMPORTS])
    sequence = value_of("SELECT pg_get_serial_sequence(%s, 'id')", [table])
    last = int(value_of("SELECT nextval(%s)", [sequence])) + MARGIN
    run("SELECT setval(%s, %s)", [sequence, last + count])
    return last
