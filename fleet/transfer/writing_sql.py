"""The statements that move staged rows into records and history."""

from __future__ import annotations

import datetime as dt
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

from django.contrib.auth.hashers import make_password
from django.db import connection, models

from fleet.history import current_writer
from fleet.models import LifeSet, Person
from fleet.transfer.cells import utc_text
from fleet.transfer.columns import FileKind
from fleet.transfer.kinds import ALL_KINDS
from fleet.transfer.staging import quoted

NOT_FINISHED = "import not finished"  # the strike-out reason of rows that wait for the last transaction
SKIPPED = {"id"}


@dataclass
class Numbers:
    """Reserved numbers by table, and what every row of this import is stamped with."""

    now: dt.datetime
    person: Person | None
    work_id: Any = None
    base: dict[str, int] = field(default_factory=dict)

    def final(self, expression: str, table: str) -> str:
        """A staged reference as the number that it will have."""
        base = self.base.get(table)
        return (
            expression
            if base is None
            else f"CASE WHEN {expression} < 0 THEN {base} - {expression} ELSE {expression} END"
        )


def insert_statement(kind: FileKind, numbers: Numbers, *, waiting: bool) -> tuple[str, list[Any]]:
    """New rows between two row numbers (the last two parameters); `waiting` stores them struck out until the flip."""
    columns, expressions, params = ["id"], [f"{numbers.base[kind.table]} - mine.id"], []
    for each in kind.model._meta.concrete_fields:
        if each.column in SKIPPED:
            continue
        expression, values = source_of(each, kind, numbers, waiting)
        columns.append(str(each.column))
        expressions.append(expression)
        params += values
    statement = (
        f"INSERT INTO {kind.table} ({quoted(*columns)}) SELECT {', '.join(expressions)} FROM {kind.stage} AS mine "
        "WHERE mine.id < 0 AND mine.row > %s AND mine.row <= %s ORDER BY mine.row"
    )
    return statement, params


def source_of(each: models.Field, kind: FileKind, numbers: Numbers, waiting: bool) -> tuple[str, list[Any]]:
    name = each.attname
    if name == "struck_out" and waiting:
        mine = "NULLIF(mine.struck_out, '')" if name in kind.staged else "NULL"
        return f"COALESCE({mine}, %s)", [NOT_FINISHED]
    if name in kind.stored:
        return staged_source(each, numbers), []
    struck = "struck_out" in kind.staged
    if name == "struck_out_at":
        return (
            ("CASE WHEN mine.struck_out <> '' THEN " + instant_sql() + " END", [utc_text(numbers.now)])
            if struck
            else (
                "NULL",
                [],
            )
        )
    if name == "struck_out_by_id":
        return (
            ("CASE WHEN mine.struck_out <> '' THEN CAST(%s AS bigint) END", [person_key(numbers)])
            if struck
            else (
                "NULL",
                [],
            )
        )
    return constant_sql(each), [constant(each, numbers)]


def staged_source(each: models.Field, numbers: Numbers) -> str:
    mine = f'mine."{each.attname}"'
    if each.is_relation:
        related: Any = each.related_model
        return numbers.final(mine, related._meta.db_table)
    return mine


def instant_sql() -> str:
    return "%s" if connection.vendor == "sqlite" else "CAST(%s AS timestamptz)"


def constant_sql(each: models.Field) -> str:
    return "%s" if connection.vendor == "sqlite" else f"CAST(%s AS {each.db_type(connection)})"


def person_key(numbers: Numbers) -> int | None:
    return numbers.person.pk if numbers.person else None


def constant(each: models.Field, numbers: Numbers) -> Any:
    """What an action would put into a column that no file has."""
    special: dict[str, Callable[[], Any]] = {
        "version": lambda: 1,
        "entered_by_id": lambda: person_key(numbers),
        "entered_at": lambda: utc_text(numbers.now),
        "batch_id": lambda: each.get_db_prep_value(numbers.work_id, connection) if numbers.work_id else None,
        "password": lambda: make_password(None),
    }
    if each.attname in special:
        return special[each.attname]()
    return None if each.null and not each.has_default() else each.get_db_prep_save(each.get_default(), connection)


# --- history


def history_statement(kind: FileKind, numbers: Numbers, sign: str, where: str) -> tuple[str, list[Any]]:
    """History rows of records just written, as the record stands (rows that wait count as standing already)."""
    historical: Any = kind.model.history.model  # type: ignore[attr-defined]
    writer = current_writer()
    own = {each.column for each in kind.model._meta.concrete_fields}
    columns = [each.column for each in historical._meta.concrete_fields if each.column in own]
    chosen = [
        f"CASE WHEN struck_out = '{NOT_FINISHED}' THEN '' ELSE struck_out END" if name == "struck_out" else quoted(name)
        for name in columns
    ]
    stamp = {
        "history_date": utc_text(numbers.now),
        "history_change_reason": writer.reason[:500],
        "history_type": sign,
        "history_user_id": person_key(numbers),
        "source": writer.source,
    }
    fields = {each.column: each for each in historical._meta.concrete_fields}
    marks = [constant_sql(fields[name]) for name in stamp]
    statement = (
        f"INSERT INTO {historical._meta.db_table} ({quoted(*columns, *stamp)}) "
        f"SELECT {', '.join([*chosen, *marks])} FROM {kind.table} WHERE {where}"
    )
    return statement, list(stamp.values())


def keeps_history(kind: FileKind) -> bool:
    return hasattr(kind.model, "history")


# --- updates


def update_statement(kind: FileKind, numbers: Numbers) -> tuple[str, list[Any]]:
    """Rows of the book that differ take what the files say."""
    changes, params = [], []
    if any(each.attname == "version" for each in kind.model._meta.concrete_fields):
        changes.append('"version" = book.version + 1')
    for name in kind.stored:
        if name not in kind.key:
            changes.append(f'"{name}" = {staged_source(kind.field_of(name), numbers)}')
    if "struck_out" in kind.stored:
        fresh = "mine.struck_out <> '' AND book.struck_out = ''"
        changes.append(f"struck_out_at = CASE WHEN {fresh} THEN {instant_sql()} ELSE book.struck_out_at END")
        changes.append(f"struck_out_by_id = CASE WHEN {fresh} THEN CAST(%s AS bigint) ELSE book.struck_out_by_id END")
        params += [utc_text(numbers.now), person_key(numbers)]
    # of a record that is all key only its links differ, yet its history says that it was changed
    changes = changes or [f'"{kind.key[0]}" = book."{kind.key[0]}"']
    statement = (
        f"UPDATE {kind.table} AS book SET {', '.join(changes)} FROM {kind.stage} AS mine "
        "WHERE mine.id = book.id AND mine.differs = 1 AND mine.id > 0"
    )
    return statement, params


KIND_OF_TABLE = {kind.table: kind for kind in ALL_KINDS}
LIFE_SETS = LifeSet._meta.db_table
