"""Empties a PostgreSQL test database between tests that commit: only the few tables that hold rows. Sweeps after files.

Django truncates all hundred and more, each with its indexes, which takes longer than most such tests.
"""

from __future__ import annotations

from typing import Any

from django.db import connection

MANY_ROWS = 2000  # from there on truncating is quicker
LARGE_BYTES = 256 * 1024

whole_flush: Any = None


def install() -> None:
    global whole_flush
    operations = type(connection.ops)
    if whole_flush is None:
        whole_flush = operations.sql_flush
        operations.sql_flush = sql_flush


def sql_flush(
    operations: Any, style: Any, tables: list[str], *, reset_sequences: bool = False, allow_cascade: bool = False
) -> list[str]:
    """Django's references are looked at when the transaction ends, so rows may go in any order."""
    quote = operations.quote_name
    full = asked(f"SELECT '{table}' WHERE EXISTS (SELECT FROM {quote(table)})" for table in tables)
    large = asked(f"SELECT '{table}' WHERE EXISTS (SELECT FROM {quote(table)} OFFSET {MANY_ROWS})" for table in full)
    if large or reset_sequences:
        return list(
            whole_flush(operations, style, tables, reset_sequences=reset_sequences, allow_cascade=allow_cascade)
        )
    # a trigger may refuse to let rows go, as with kept forecasts; truncating comes first, while no reference waits
    guarded = set(asked(["SELECT tgrelid::regclass::text FROM pg_trigger WHERE NOT tgisinternal"]))
    return [f"TRUNCATE {quote(table)} CASCADE" for table in full if table in guarded] + [
        f"DELETE FROM {quote(table)}" for table in full if table not in guarded
    ]


def sweep() -> None:
    """Gives back the space of rows that were taken back, so that tables do not grow from test to test."""
    large = (
        "SELECT oid::regclass::text FROM pg_class WHERE relkind = 'r' AND relnamespace = 'public'::regnamespace "
        f"AND pg_relation_size(oid) > {LARGE_BYTES}"
    )
    tables = asked([large])
    if tables:
        with connection.cursor() as cursor:
            cursor.execute(f"VACUUM {', '.join(tables)}")
    connection.close()


def asked(questions: Any) -> list[str]:
    text = " UNION ALL ".join(questions)
    if not text:
        return []
    with connection.cursor() as cursor:
        cursor.execute(text)
        return [row[0] for row in cursor.fetchall()]
