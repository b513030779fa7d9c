"""How the nouns of the catalogue are saved: the row as it is now, the fields put in, the version raised."""

from __future__ import annotations

from typing import Any

from django.db import models

from fleet.actions.changed_since import check_version
from fleet.actions.checks_values import clean_day, clean_planned_day
from fleet.actions.errors import BadValue
from fleet.actions.writes import add, save_again

MAY_LIE_AHEAD = {"next_visit_on", "due_on"}


class Saving:
    """One noun on its way into the book; `before` holds the values that change."""

    def __init__(self, model: type[models.Model], record: Any, version: int | None, fields: dict[str, Any]) -> None:
        self.is_new = record is None
        self.record: Any = model() if record is None else opened(model, record)
        many = {column.name for column in model._meta.many_to_many}
        self.lists = {name: list(value or ()) for name, value in fields.items() if name in many}
        plain = {name: clean_field(model, name, value) for name, value in fields.items() if name not in many}
        self.before = {name: self.now(name) for name, value in plain.items() if self.differs(name, value)}
        self.old_lists = {} if self.is_new else {name: self.list_now(name) for name in self.lists}
        if not self.is_new and self.changes_anything:
            check_version(self.record, version)
        for name in self.before:
            setattr(self.record, name, plain[name])

    def differs(self, name: str, value: Any) -> bool:
        if self.is_new:
            return True
        return bool(self.now(name) != (value.pk if isinstance(value, models.Model) else value))

    def now(self, name: str) -> Any:
        return getattr(self.record, self.record._meta.get_field(name).attname)

    def list_now(self, name: str) -> set[int]:
        return set(getattr(self.record, name).values_list("pk", flat=True))

    @property
    def changes_anything(self) -> bool:
        return bool(self.before) or any(
            {row.pk for row in rows} != self.old_lists.get(name, set()) for name, rows in self.lists.items()
        )

    def changes(self, *names: str) -> bool:
        return any(name in self.before for name in names)

    def store(self) -> Any:
        """Writes the row with its history, then the lists that belong to it."""
        if not self.changes_anything:
            return self.record
        if self.is_new:
            add(self.record)
        else:
            save_again(self.record, set(self.before))
        for name, rows in self.lists.items():
            if {row.pk for row in rows} != self.old_lists.get(name, set()):
                getattr(self.record, name).set(rows)
        return self.record


def opened(model: type[models.Model], record: Any) -> Any:
    """The row under a lock that lets others go on pointing at it."""
    return model._default_manager.select_for_update(of=("self",), no_key=True).get(pk=record.pk)


def clean_field(model: type[models.Model], name: str, value: Any) -> Any:
    column = model._meta.get_field(name)
    if value is None and not column.null:
        if isinstance(column, (models.CharField, models.TextField)):
            return ""
        raise BadValue(f"“{name.replace('_', ' ')}” is missing. Enter it.", field=name)
    kind = column.related_model if column.is_relation else None
    if kind is not None and value is not None and not isinstance(value, kind):
        raise BadValue(f"“{name.replace('_', ' ')}” is not on record. Choose one from the list.", field=name)
    if isinstance(column, models.DateField):
        return (clean_planned_day if name in MAY_LIE_AHEAD else clean_day)(value, field=name)
    return value


def only(fields: dict[str, Any], allowed: set[str], noun: str) -> dict[str, Any]:
    for name in fields:
        if name not in allowed:
            raise BadValue(f"A {noun} has no “{name}”. Leave it out.", field=name)
    return fields
