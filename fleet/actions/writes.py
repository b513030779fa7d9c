"""One row written with its history, its checks and its code."""

from __future__ import annotations

from typing import Any

from django.db import IntegrityError, models, transaction

from fleet.actions.checks_values import clean_columns, shown
from fleet.actions.errors import BadValue
from fleet.models.codes import Coded, clean_code, new_code


def add(record: models.Model, *, code: str | None = None, prefix: str = "") -> Any:
    """Checks every column, then inserts; a code that is taken is refused in words."""
    given = isinstance(record, Coded) and (code is not None or bool(record.code))
    if isinstance(record, Coded) and not record.code:
        record.code = new_code(prefix) if code is None else code
    clean_columns(record)
    if given:
        check_code_free(record)
    with_savepoint(record, given)
    return record


def check_code_free(record: Coded) -> None:
    taken = type(record)._default_manager.filter(code=clean_code(record.code)).exclude(pk=record.pk)
    if taken.exists():
        raise code_taken(record)


def with_savepoint(record: models.Model, given: bool) -> None:
    """Two writers may choose one code at one moment: the second is told, and its transaction stays whole."""
    if not given:
        record.save()
        return
    try:
        with transaction.atomic():
            record.save()
    except IntegrityError:
        if type(record)._default_manager.filter(code=clean_code(record.code)).exclude(pk=record.pk).exists():
            raise code_taken(record) from None
        raise


def code_taken(record: Coded) -> BadValue:
    noun = record._meta.verbose_name
    return BadValue(f"{str(noun).capitalize()} {shown(record.code)} exists already. Choose another code.", field="code")


def save_again(record: Any, changed: set[str] | None = None) -> Any:
    """Updates a record that has a version: one more, with its history."""
    clean_columns(record, changed)
    record.version += 1
    record.save()
    return record
