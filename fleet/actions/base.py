"""What every action stands on: one transaction, one writer, the module's row locked, the data version raised."""

from __future__ import annotations

import datetime as dt
import hashlib
import json
import logging
import uuid
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from contextvars import ContextVar
from dataclasses import fields, is_dataclass
from typing import Any

from django.db import IntegrityError, OperationalError, transaction
from django.db.models import Model

from fleet.actions.errors import BadValue, Collided, NotAllowed
from fleet.history import writing
from fleet.models import DataVersion, EntryKey, Module, Person, Role
from fleet.rights import may, seen_by

log = logging.getLogger(__name__)
USED_KEY = "This entry key was used for another entry. Open the form again."
_raises: ContextVar[list[bool] | None] = ContextVar("raises", default=None)
RETRY = dt.timedelta(hours=1)  # how far the times of one submission, sent twice, may lie apart


@contextmanager
def change(
    *, by: Person | None, right: str, module: Module | None = None, reason: str = "", raises_version: bool = True
) -> Iterator[Any]:
    """One change of the records; yields the module as it is under its lock. `by` is None only for commands.

    Of changes within changes the outermost raises the version: everybody waits for that row from then on.
    """
    outer = _raises.get()
    wanted: list[bool] = [] if outer is None else outer
    token = _raises.set(wanted)
    try:
        with told_in_words(), transaction.atomic(), writing(person=by, reason=reason or None):
            if by is not None:
                require(by, right)
            yield lock_module(module, by) if module is not None else None
            if raises_version:
                wanted.append(True)
            if outer is None and wanted:
                DataVersion.raise_version()
    finally:
        _raises.reset(token)


@contextmanager
def told_in_words() -> Iterator[None]:
    """The guards of the database are the last ones; whoever runs into one gets a sentence, and the log the rest."""
    try:
        yield
    except IntegrityError as error:
        log.exception("The database refused a change.")
        raise Collided(
            "Somebody recorded something here at the same moment. Look at it again, then send yours once more."
        ) from error
    except OperationalError as error:
        if not waited_too_long(error):
            raise
        log.exception("A change waited too long.")
        raise Collided("The book was busy for too long, and nothing was recorded. Send it once more.") from error


def waited_too_long(error: OperationalError) -> bool:
    return any(word in str(error) for word in ("locked", "deadlock"))


def require(by: Person, right: str) -> None:
    if not may(by, right):
        raise NotAllowed(f"A {by.role} may not do this. Ask a manager of your book.")


def lock_module(module: Module, by: Person | None = None) -> Module:
    """Locks the module's row until the commit and reads it; refuses a module that the person may not see."""
    rows = Module.objects.filter(pk=module.pk)
    locked = rows.select_for_update(of=("self",), no_key=True).first()
    if locked is None or (by is not None and not sees(by, locked)):
        raise NotAllowed(f"Module {module.code} does not stand at a site of yours. Ask your planner.")
    return locked


def sees(by: Person, record: Model) -> bool:
    if by.all_sites and by.role != Role.BENCH:
        return True
    return bool(seen_by(by, type(record)).filter(pk=record.pk).exists())


@contextmanager
def once(
    key: uuid.UUID | None, *, by: Person | None, verb: str, said: Any = None, at: dt.datetime | None = None
) -> Iterator[dict[str, Any]]:
    """Inside `change`: yields the answer given before for this key (empty the first time), keeps what is put in.

    The row is inserted first, so that two equal submissions at one moment wait for each other and the
    second reads the first's answer. What was `said` must be the same; its time may differ by what a retry takes.
    """
    if key is None:
        yield {}
        return
    entry, fresh = EntryKey.objects.select_for_update(of=("self",)).get_or_create(
        key=key, defaults={"person": by, "verb": verb}
    )
    print_now = fingerprint(said)
    if not fresh and (entry.verb != verb or entry.person_id != (by.pk if by else None)):
        raise BadValue(USED_KEY, field="entry_key")
    if not fresh and not same_submission(entry.answer, print_now, at):
        raise BadValue(USED_KEY, field="entry_key")
    answer: dict[str, Any] = {} if fresh else dict(entry.answer)
    yield answer
    if fresh:
        entry.answer = {**answer, "said": print_now, "at": at.isoformat() if at else None}
        entry.save(update_fields=["answer"])


def same_submission(answer: dict[str, Any], print_now: str, at: dt.datetime | None) -> bool:
    if answer.get("said") != print_now:
        return False
    before = answer.get("at")
    if before is None or at is None:
        return before is None and at is None
    return abs(dt.datetime.fromisoformat(before) - at) < RETRY


def fingerprint(said: Any) -> str:
    """The same text for the same submission, whatever objects it came in."""
    return hashlib.sha256(json.dumps(plain(said), sort_keys=True).encode()).hexdigest()


def plain(value: Any) -> Any:
    if isinstance(value, Model):
        return f"{value._meta.label_lower} {value.pk}"
    if is_dataclass(value) and not isinstance(value, type):
        return {each.name: plain(getattr(value, each.name)) for each in fields(value)}
    if isinstance(value, Mapping):
        return sorted([plain(key), plain(item)] for key, item in value.items())
    if isinstance(value, (list, tuple)):
        return [plain(item) for item in value]
    return value if isinstance(value, (int, bool, type(None))) else repr(value)
