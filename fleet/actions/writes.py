"""One row written with its history, its checks and its code."""

from __future__ import annotations

from typing import Any

from django.db import IntegrityError, models, transaction

from fleet.actions.checks_values import clean_columns, shown
from fleet.actions.errors import BadValue
from fleet.models import FailureMode, Position
from fleet.models.codes import Coded, clean_code, new_code

# Codes that are told apart only within their owner.
OWNERS: dict[type[models.Model], str] = {FailureMode: "component_id", Position: "type_id"}


def add(record: models.Model, *, code: str | None = None, prefix: str = "") -> Any:
    """Checks every column, then inserts; a record that people do not name gets a code of its own."""
    named = code is not None or not prefix
    if code is not None:
        record.code = code  # type: ignore[attr-defined]
    elif prefix:
        record.code = new_code(prefix)  # type: ignore[attr-defined]
    clean_columns(record)
    save_named(record) if named and hasattr(record, "code") else record.save()
    return record


def save_again(record: Any, changed: set[str] | None = None) -> Any:
    """Updates a record that has a version: one more, with its history."""
    clean_columns(record, changed)
    record.version += 1
    save_named(record) if changed is not None and "code" in changed else record.save()
    return record


def save_named(record: Any) -> None:
    """A code that is taken is refused in words; of two writers at one moment the second is told."""
    if same_code(record).exists():
        raise code_taken(record)
    try:
        with transaction.atomic():
            record.save()
    except IntegrityError:
        if same_code(record).exists():
            raise code_taken(record) from None
        raise


def same_code(record: Any) -> models.QuerySet:
    rows = type(record)._default_manager.filter(code=clean_code(record.code)).exclude(pk=record.pk)
    owner = OWNERS.get(type(record))
    return rows.filter(**{owner: getattr(record, owner)}) if owner else rows


def code_taken(record: Coded) -> BadValue:
    noun = str(record._meta.verbose_name).capitalize()
    return BadValue(f"{noun} {shown(record.code)} exists already. Choose another code.", field="code")
