"""Temporary tables of this connection that hold the rows of the files while they are checked.

SQLite keeps temporary tables in a file of their own: filling and reading them never holds up anybody who writes to
the book. On both engines they are gone with the connection, so that a killed import leaves nothing of them.
"""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from operator import itemgetter
from typing import Any

from django.db import connection

from fleet.transfer.columns import FileKind

OWN_COLUMNS = {
    "row": "integer PRIMARY KEY",
    "bad": "smallint NOT NULL",  # an error was found: references to it hold, further checks pass it by
    "id": "bigint",  # of the record in the book, or the negative row number of one that is not stored yet
    "differs": "smallint NOT NULL",
}


def on_sqlite() -> bool:
    return connection.vendor == "sqlite"


def run(sql: str, params: Sequence[Any] = ()) -> int:
    with connection.cursor() as cursor:
        cursor.execute(sql, list(params))
        return cursor.rowcount


def fetch(sql: str, params: Sequence[Any] = ()) -> list[tuple[Any, ...]]:
    with connection.cursor() as cursor:
        cursor.execute(sql, list(params))
        return cursor.fetchall()


def value_of(sql: str, params: Sequence[Any] = ()) -> Any:
    return fetch(sql, params)[0][0]


def quoted(*names: str) -> str:
    return ", ".join(f'"{name}"' for name in names)


def as_day(value: Any) -> dt.date:
    return value if isinstance(value, dt.date) else dt.date.fromisoformat(str(value)[:10])


def drop_stages(kinds: Sequence[FileKind]) -> None:
    for name in [*(kind.stage for kind in kinds), "touched_modules", "touched_stock", "visit_days"]:
        run(f"DROP TABLE IF EXISTS {temporary(name)}")


def temporary(name: str) -> str:
    return f"temp.{name}" if on_sqlite() else f"pg_temp.{name}"


def create_stage(kind: FileKind) -> None:
    types = {name: kind.field_of(name).db_type(connection) for name in kind.stored} | kind.extra
    columns = [f'"{name}" {kind_of}' for name, kind_of in {**OWN_COLUMNS, **types}.items()]
    run(f"CREATE TEMPORARY TABLE {kind.stage} ({', '.join(columns)})")


def stage_exists(name: str) -> bool:
    if on_sqlite():
        return bool(fetch("SELECT 1 FROM temp.sqlite_master WHERE type = 'table' AND name = %s", [name]))
    return value_of("SELECT to_regclass(%s)", [f"pg_temp.{name}"]) is not None


def fill(kind: FileKind, rows: list[list[Any]]) -> None:
    """Rows in the order row, bad, id, differs, then the staged columns."""
    if not rows:
        return
    for place in kind.days_and_money:
        at = len(OWN_COLUMNS) + place
        for row in rows:
            if row[at] is not None:
                row[at] = str(row[at])
    columns = [*OWN_COLUMNS, *kind.staged]
    used = [at for at in range(len(columns)) if any(row[at] is not None for row in rows)]
    names = quoted(*(columns[at] for at in used))
    # Most columns of most files are empty, and each would cost its time in each row.
    chosen = map(itemgetter(*used), rows)
    with connection.cursor() as cursor:
        if not on_sqlite():
            with cursor.copy(f"COPY {kind.stage} ({names}) FROM STDIN") as copy:
                for row in chosen:
                    copy.write_row(row)
            return
        marks = ", ".join(["%s"] * len(used))
        with one_temporary_transaction():
            cursor.executemany(f"INSERT INTO {kind.stage} ({names}) VALUES ({marks})", chosen)


@contextmanager
def one_temporary_transaction() -> Iterator[None]:
    """On SQLite many writes to temporary tables at once, without asking for the book's own lock."""
    if not on_sqlite() or connection.in_atomic_block:
        yield
        return
    run("BEGIN")
    try:
        yield
    except BaseException:
        run("ROLLBACK")
        raise
    run("COMMIT")


def index_stage(kind: FileKind, *columns: str) -> None:
    name = f"{kind.stage}_{'_'.join(columns)}"[:60]
    if on_sqlite():
        run(f"CREATE INDEX IF NOT EXISTS temp.{name} ON {kind.stage} ({quoted(*columns)})")
    else:
        run(f"CREATE INDEX IF NOT EXISTS {name} ON {kind.stage} ({quoted(*columns)})")


def analyse(kind: FileKind) -> None:
    """PostgreSQL plans joins with temporary tables badly until it has seen their size."""
    if not on_sqlite():
        run(f"ANALYZE {kind.stage}")
