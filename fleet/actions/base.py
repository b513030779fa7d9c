"""What every action stands on: one transaction, one writer, the module's row locked, the data version raised."""

from __future__ import annotations

import datetime as dt
import uuid
from collections.abc import Iterator
from contextlib import contextmanager
from typing import Any

from django.db import connection, transaction
from django.utils import timezone

from fleet.actions.errors import BadValue, NotAllowed, day_words
from fleet.history import writing
from fleet.models import DataVersion, EntryKey, Module, Person, Site
from fleet.rights import may, seen_by


@contextmanager
def change(
    *, by: Person | None, right: str, module: Module | None = None, reason: str = "", raises_version: bool = True
) -> Iterator[None]:
    """One change of the records. `by` is None only for commands on the machine itself."""
    with transaction.atomic(), writing(person=by, reason=reason or None):
        if by is not None:
            require(by, right)
        if module is not None:
            lock_module(module, by)
        yield
        if raises_version:
            DataVersion.raise_version()


def require(by: Person, right: str) -> None:
    if not may(by, right):
        raise NotAllowed(f"A {by.role} may not do this. Ask a manager of your book.")


def lock_module(module: Module, by: Person | None = None) -> Module:
    """Locks the module's row until the commit; refuses a module that the person may not see."""
    rows = Module.objects.filter(pk=module.pk)
    if connection.features.has_select_for_update:
        list(rows.select_for_update().values_list("pk", flat=True))
    if by is not None and not seen_by(by, Module).filter(pk=module.pk).exists():
        raise NotAllowed(f"Module {module.code} does not stand at a site of yours.")
    return module


def not_in_future(day: dt.date | None, *, field: str, site: Site | None = None) -> None:
    """A day up to today in the site's zone."""
    now = timezone.now()
    today = site.day_of(now) if site else (now + dt.timedelta(hours=14)).date()
    if day is not None and day > today:
        raise BadValue(f"{day_words(day)} lies in the future. Enter a day up to today.", field=field)


@contextmanager
def once(key: uuid.UUID | None, *, by: Person | None, verb: str) -> Iterator[dict[str, Any]]:
    """Inside `change`: yields the answer given before for this key (empty the first time), keeps what is put in.

    The row is inserted first, so that two equal submissions at one moment wait for each other and the
    second reads the first's answer.
    """
    if key is None:
        yield {}
        return
    entry, fresh = EntryKey.objects.select_for_update(of=("self",)).get_or_create(
        key=key, defaults={"person": by, "verb": verb}
    )
    if not fresh and (entry.verb != verb or entry.person_id != (by.pk if by else None)):
        raise BadValue("This entry key was used for another entry. Open the form again.")
    answer: dict[str, Any] = {} if fresh else dict(entry.answer)
    yield answer
    if fresh:
        entry.answer = answer
        entry.save(update_fields=["answer"])
