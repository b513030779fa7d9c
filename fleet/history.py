"""Who changed what, when, from where; and the only helpers that may change many rows at once.

Every record model carries `history = kept_history()`. The writer (person, source, reason) is set once for a
request, command or import by `writing(...)` and stamped on each history row.
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from contextvars import ContextVar
from dataclasses import dataclass, replace
from typing import Any

from django.db import models
from django.dispatch import receiver
from simple_history.models import HistoricalRecords
from simple_history.signals import pre_create_historical_record
from simple_history.utils import bulk_create_with_history, bulk_update_with_history

SOURCES = ["browser", "api", "file", "command", "demo", "unknown"]


@dataclass(frozen=True)
class Writer:
    person: Any = None  # a fleet.Person, or None where a command without a person writes
    source: str = "unknown"
    reason: str = ""


NOBODY = Writer()
_writer: ContextVar[Writer] = ContextVar("writer", default=NOBODY)


def current_writer() -> Writer:
    return _writer.get()


@contextmanager
def writing(*, person: Any = None, source: str | None = None, reason: str | None = None) -> Iterator[Writer]:
    """Everything written inside is stamped with this writer; what is left out is inherited."""
    before = _writer.get()
    writer = replace(
        before,
        person=person if person is not None else before.person,
        source=source if source is not None else before.source,
        reason=reason if reason is not None else before.reason,
    )
    token = _writer.set(writer)
    try:
        yield writer
    finally:
        _writer.reset(token)


class ChangeOrigin(models.Model):
    """From where a change came, on every history row."""

    source = models.CharField(max_length=10, default="unknown")

    class Meta:
        abstract = True


def _writing_person(instance: models.Model, **_: Any) -> Any:
    return current_writer().person


def kept_history(**kwargs: Any) -> HistoricalRecords:
    """The history of one record model, with person, source and reason."""
    return HistoricalRecords(
        bases=[ChangeOrigin],
        history_id_field=models.BigAutoField(),
        history_change_reason_field=models.CharField(max_length=500, default="", blank=True, null=True),
        get_user=_writing_person,
        user_db_constraint=False,
        **kwargs,
    )


@receiver(pre_create_historical_record)
def stamp_origin(sender: type, history_instance: Any, **_: Any) -> None:
    writer = current_writer()
    history_instance.source = writer.source
    if not history_instance.history_change_reason:
        history_instance.history_change_reason = writer.reason[:500]


def create_many(rows: list[Any], model: type[models.Model], batch_size: int = 500) -> list[Any]:
    """Create rows with their history; the writer's stamp included."""
    writer = current_writer()
    return bulk_create_with_history(
        rows,
        model,
        batch_size=batch_size,
        default_user=writer.person,
        default_change_reason=writer.reason[:500],
        custom_historical_attrs={"source": writer.source},
    )


def update_many(rows: list[Any], model: type[models.Model], fields: list[str], batch_size: int = 500) -> None:
    """Update rows with their history; the writer's stamp included."""
    writer = current_writer()
    bulk_update_with_history(
        rows,
        model,
        fields,
        batch_size=batch_size,
        default_user=writer.person,
        default_change_reason=writer.reason[:500],
        custom_historical_attrs={"source": writer.source},
    )
