"""A wrong entry is corrected, with a reason; the old values stay in its history."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from django.db import models

from fleet.actions.base import change
from fleet.actions.changed_since import check_version, describe
from fleet.actions.checks_places import Places
from fleet.actions.checks_rights import check_may_correct, module_of
from fleet.actions.checks_values import clean_day, clean_instant, clean_text
from fleet.actions.correct_bench import correct_hours, correct_job
from fleet.actions.correct_fitting import correct_fitting
from fleet.actions.correct_others import correct_finding, correct_placement, correct_stop
from fleet.actions.correct_visit import correct_visit
from fleet.actions.corrections import Correction
from fleet.actions.errors import AlreadyDone, BadValue
from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.models import (
    BenchHours,
    BenchJob,
    Finding,
    Fitting,
    Module,
    Person,
    Placement,
    Reading,
    StockMove,
    Stop,
    Visit,
)
from fleet.rights import LOG

Corrector = Callable[[Correction], None]
CORRECTORS: dict[type[models.Model], tuple[Corrector, set[str]]] = {
    Visit: (correct_visit, {"happened_at", "crew", "left", "known_on", "note"}),
    Fitting: (
        correct_fitting,
        {
            "position", "part", "serial", "lot", "fitted_on", "age_at_fit", "strokes_at_fit", "hours_at_fit",
            "fitted_known_on", "failed_on", "removed_on", "strokes_at_removal", "hours_at_removal", "reason", "mode",
            "found_by", "last_good_on", "caused_by", "removed_known_on", "note",
        },
    ),
    Stop: (correct_stop, {"stopped_at", "running_at", "known_on", "note"}),
    Finding: (correct_finding, {"position", "finding", "mode", "note"}),
    Placement: (correct_placement, {"site", "bay", "from_on", "to_on"}),
    BenchJob: (correct_job, {"reason", "received_on", "started_on", "finished_on", "outcome", "note"}),
    BenchHours: (correct_hours, {"day", "hours"}),
}  # fmt: skip


def correct_record(*, by: Person | None, record: Any, version: int | None, changes: dict[str, Any], reason: str) -> Any:
    """`version` is the one that was open; a second, different edit is told what changed since."""
    corrector = corrector_of(record, changes)
    reason = clean_reason(reason)
    with change(by=by, right=LOG, module=module_of(record), reason=reason) as module:
        record = fetched(record, module)
        if record.struck_out:
            raise AlreadyDone(f"This was struck out: {record.struck_out}. Enter it again if it was right.")
        changes = {name: cleaned(record, name, value, module) for name, value in changes.items()}
        if all(same(record, name, value) for name, value in changes.items()):
            return record
        check_may_correct(by, record, changes)
        check_version(record, version)
        corrector(Correction(record=record, changes=changes, module=module, by=by, reason=reason))
        rebuild_clocks([module.pk])
    return record


def corrector_of(record: Any, changes: dict[str, Any]) -> Corrector:
    if isinstance(record, Reading):
        raise BadValue("A reading is not edited. Enter the right one, then strike this one out.", field="record")
    if isinstance(record, StockMove):
        raise BadValue("A stock move is not edited. Enter the right one, then strike this one out.", field="record")
    if type(record) not in CORRECTORS:
        raise BadValue(f"{describe(record).capitalize()} is not corrected this way.", field="record")
    corrector, allowed = CORRECTORS[type(record)]
    for name in changes:
        if name not in allowed:
            raise BadValue(f"“{name}” of {describe(record)} cannot be corrected. Strike it out instead.", field=name)
    return corrector


def clean_reason(reason: str) -> str:
    reason = clean_text(reason, field="reason", longest=500, words="The reason")
    if not reason:
        raise BadValue("The reason is missing. Say why in a few words.", field="reason")
    return reason


def fetched(record: Any, module: Module) -> Any:
    """The record as it is under the module's lock."""
    if isinstance(record, Finding):
        record = Finding.objects.select_related("visit", "position").get(pk=record.pk)
        record.visit.module = module
        return record
    joined = ("position", "part", "fitted_visit", "removed_visit") if isinstance(record, Fitting) else ()
    record = type(record).objects.select_related(*joined).get(pk=record.pk)
    record.module = module
    return record


def cleaned(record: Any, name: str, value: Any, module: Module) -> Any:
    column = record._meta.get_field(name)
    if value is None and not column.null:
        if isinstance(column, (models.CharField, models.TextField)):
            return ""
        raise BadValue(f"“{name}” is missing. Enter it.", field=name)
    if value is None:
        return None
    if column.is_relation and not isinstance(value, column.related_model):
        raise BadValue(f"“{name}” is not on record. Choose one from the list.", field=name)
    if isinstance(column, models.DateTimeField):
        return clean_instant(value, field=name)
    if isinstance(column, models.DateField):
        return clean_day(value, field=name, today=Places(module).now().today)
    return value


def same(record: Any, name: str, value: Any) -> bool:
    column = record._meta.get_field(name)
    return bool(getattr(record, column.attname) == (value.pk if isinstance(value, models.Model) else value))
