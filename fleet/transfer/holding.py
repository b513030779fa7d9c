"""On SQLite, where one writer holds up all others: large files go in by short transactions, struck out, and the last
transaction makes all of them stand at once. Whatever ends the import before that leaves nothing but rows to sweep."""

from __future__ import annotations

import time
from collections.abc import Callable
from functools import partial
from typing import Any

from django.db import connection, transaction

from fleet.models import Work, WorkState
from fleet.transfer.columns import FileKind
from fleet.transfer.staging import fetch, on_sqlite, run
from fleet.transfer.writing_sql import (
    KIND_OF_TABLE,
    NOT_FINISHED,
    Numbers,
    history_statement,
    insert_statement,
    keeps_history,
)

FIRST_ROWS = 2000
WANTED_SECONDS = 0.4  # a writer waits for one batch, and gets in at the pause after it
PAUSE_SECONDS = 0.1  # SQLite lets a waiting writer look every tenth of a second: a shorter pause could be missed
Step = Callable[[int, str], None]


def waits(kind: FileKind) -> bool:
    """Records that can be struck out can be stored before they count."""
    return on_sqlite() and any(each.attname == "struck_out" for each in kind.model._meta.concrete_fields)


def hold_rows(kind: FileKind, last_row: int, numbers: Numbers, hold: Callable[[], None], step: Step) -> None:
    """Stores the new rows of one file by short transactions."""
    insert, params = insert_statement(kind, numbers, waiting=True)
    done, size = 0, FIRST_ROWS
    base = numbers.base[kind.table]
    while done < last_row:
        upto = min(done + size, last_row)
        started = time.monotonic()
        with transaction.atomic():
            hold()
            run(insert, [*params, done, upto])
            write_history(kind, numbers, base + done, base + upto)
        took = time.monotonic() - started
        size = max(500, min(20_000, int(size * WANTED_SECONDS / max(took, 0.01))))
        step(upto - done, f"Storing {kind.file}")
        done = upto
        pause()


def write_history(kind: FileKind, numbers: Numbers, above: int, upto: int) -> None:
    if keeps_history(kind):
        statement, params = history_statement(kind, numbers, "+", f"id > {above} AND id <= {upto} ORDER BY id")
        run(statement, params)


def pause() -> None:
    if on_sqlite() and not connection.in_atomic_block:
        time.sleep(PAUSE_SECONDS)


def let_stand(kind: FileKind, last_row: int, numbers: Numbers) -> None:
    """In the last transaction: everything that waited stands."""
    base = numbers.base[kind.table]
    run(
        f"UPDATE {kind.table} SET struck_out = '' WHERE id > %s AND id <= %s AND struck_out = %s",
        [base, base + last_row, NOT_FINISHED],
    )


def sweep(ranges: dict[str, list[int]]) -> None:
    """Takes away rows that still wait, and their history; the newest file first, since it refers to the others."""
    for table, (low, high) in reversed(ranges.items()):
        kind = KIND_OF_TABLE[table]
        while True:
            with transaction.atomic():
                waiting = fetch(
                    f"SELECT id FROM {table} WHERE id > %s AND id <= %s AND struck_out = %s ORDER BY id LIMIT 2000",
                    [low, high, NOT_FINISHED],
                )
                if not waiting:
                    break
                first, last = waiting[0][0], waiting[-1][0]
                if keeps_history(kind):
                    historical: Any = kind.model.history.model  # type: ignore[attr-defined]
                    run(f"DELETE FROM {historical._meta.db_table} WHERE id >= %s AND id <= %s", [first, last])
                run(f"DELETE FROM {table} WHERE id >= %s AND id <= %s AND struck_out = %s", [first, last, NOT_FINISHED])
            pause()


def sweep_leftovers() -> None:
    """Of imports that were given up on."""
    ended = Work.objects.filter(kind="import_records", state__in=[WorkState.FAILED, WorkState.CANCELLED])
    for work in ended.filter(result__has_key="holding"):
        without_constraints(partial(sweep, work.result["holding"]))
        work.result = {key: value for key, value in work.result.items() if key != "holding"}
        work.save(update_fields=["result"])


def without_constraints(do: Callable[[], Any]) -> Any:
    """SQLite only: rows that wait may refer to records that come with the last transaction."""
    if not on_sqlite() or connection.in_atomic_block:
        return do()
    connection.disable_constraint_checking()
    try:
        return do()
    finally:
        connection.enable_constraint_checking()
