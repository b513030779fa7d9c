"""Anyone marks a record that looks wrong, with a word why."""

from __future__ import annotations

from typing import Any

from fleet.actions.base import change, lock_module, sees
from fleet.actions.checks_places import Places
from fleet.actions.checks_rights import module_of
from fleet.actions.checks_values import clean_text
from fleet.actions.errors import BadValue, NotAllowed
from fleet.actions.writes import add
from fleet.models import Finding, LooksWrong, Module, Person, RecordKind, Site
from fleet.rights import REPORT


def say_looks_wrong(*, by: Person, record: Any, word: str) -> LooksWrong:
    """It waits until a planner or manager corrects or confirms the record; said twice, it waits once."""
    kind = kind_of(record)
    word = clean_text(word, field="word", longest=500, words="Why it looks wrong")
    if not word:
        raise BadValue("Why it looks wrong is missing. Say it in a few words.", field="word")
    with change(by=by, right=REPORT, raises_version=False):
        if not sees(by, record):
            raise NotAllowed("This record belongs to a site that is none of yours. Ask your planner.")
        module = lock_module(record if isinstance(record, Module) else module_of(record))  # said twice at once, too
        waiting = LooksWrong.objects.waiting().filter(kind=kind, record=record.pk, said_by=by, word=word).first()
        if waiting is not None:
            return waiting
        doubt = LooksWrong(
            kind=kind, record=record.pk, module=module, word=word, said_by=by, site=site_of(record, module)
        )
        add(doubt)
    return doubt


def kind_of(record: Any) -> str:
    kind = type(record).__name__.lower()
    if kind not in RecordKind.values:
        raise BadValue(f"{type(record).__name__} is no record that can look wrong. Choose a record.", field="record")
    return kind


def site_of(record: Any, module: Module) -> Site | None:
    """Where it happened; for a fitting or the module itself, where the module stands now."""
    if isinstance(record, Finding):
        return record.visit.site
    return record.site if hasattr(record, "site") else Places(module).now().site
