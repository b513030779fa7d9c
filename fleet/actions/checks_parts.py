"""Whether position, part, mode and reason belong together."""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterable

from fleet.actions.checks_values import choose
from fleet.actions.errors import BadValue, day_words
from fleet.models import FAILURE_REASONS, FailureMode, Fitting, FoundBy, Module, Part, Position, RemovalReason

WITHOUT_MODE = {RemovalReason.PLANNED, RemovalReason.UPGRADE, RemovalReason.MODULE_WITHDRAWN}


def check_position(position: Position | None, module: Module) -> None:
    if position is None:
        raise BadValue("The position is missing. Choose one.", field="position")
    if position.type_id != module.type_id:
        raise BadValue(
            f"Position {position.code} belongs to another type than module {module.code}. "
            "Choose a position of this module.",
            field="position",
        )


def check_part(part: Part | None, position: Position) -> None:
    """An ended part may still be fitted from stock."""
    if part is None:
        raise BadValue("The part is missing. Choose one.", field="part")
    if part.component_id != position.component_id:
        raise BadValue(
            f"Part {part.code} is of another component than position {position.code} holds. Choose a part for it.",
            field="part",
        )


def check_parts_fit_type(parts: Iterable[Part], module: Module) -> None:
    """One query for all parts: a part without named types fits every one."""
    by_key = {part.pk: part for part in parts}
    if not by_key:
        return
    named = Part.fits_types.through.objects.filter(part__in=by_key).values_list("part_id", "moduletype_id")
    types: dict[int, set[int]] = {}
    for part_key, type_key in named:
        types.setdefault(part_key, set()).add(type_key)
    for part_key, fitting_types in types.items():
        if module.type_id not in fitting_types:
            raise BadValue(
                f"Part {by_key[part_key].code} does not fit modules of the type of {module.code}. "
                "Choose another part, or add the type to the part in the catalogue.",
                field="part",
            )


def check_mode(mode: FailureMode | None, position: Position) -> None:
    if mode is not None and mode.component_id != position.component_id:
        raise BadValue(
            f"Failure mode {mode.code} is of another component than position {position.code} holds. "
            "Choose one from its own list.",
            field="mode",
        )


def check_removal(fitting: Fitting) -> None:
    """Reason, mode, days of failure and of last being good against the stay itself."""
    choose(fitting.reason, RemovalReason, field="reason")
    choose(fitting.found_by, FoundBy, field="found_by")
    if fitting.removed_on is None:
        check_still_fitted(fitting)
        return
    if not fitting.reason:
        raise BadValue("The reason of the removal is missing. Choose one.", field="reason")
    if fitting.fitted_on is not None and fitting.removed_on < fitting.fitted_on:
        raise BadValue(
            f"Removed on {day_words(fitting.removed_on)}, before it was fitted on {day_words(fitting.fitted_on)}. "
            "Enter a day from then on.",
            field="removed_on",
        )
    if fitting.reason in WITHOUT_MODE and fitting.mode_id is not None:
        raise BadValue(
            f"A part removed as “{fitting.reason}” has no failure mode. Leave the mode empty, or choose “failed”.",
            field="mode",
        )
    check_failure_days(fitting)


def check_still_fitted(fitting: Fitting) -> None:
    for field in ("reason", "mode_id", "failed_on", "last_good_on", "caused_by_id"):
        if getattr(fitting, field):
            name = field.removesuffix("_id")
            raise BadValue(
                f"Part {fitting.code} is still fitted, so “{name.replace('_', ' ')}” must stay empty. "
                "Enter the day it came out.",
                field=name,
            )


def check_failure_days(fitting: Fitting) -> None:
    for field in ("failed_on", "last_good_on"):
        day: dt.date | None = getattr(fitting, field)
        if day is None:
            continue
        if fitting.reason not in FAILURE_REASONS:
            raise BadValue(
                f"Removed as “{fitting.reason}”, yet with a day of failure. Leave the day empty, or choose “failed”.",
                field=field,
            )
        ends = (fitting.fitted_on, fitting.failed_on if field == "last_good_on" else None, fitting.removed_on)
        check_between(day, ends[0], ends[1] or ends[2], field)


def check_between(day: dt.date, first: dt.date | None, last: dt.date | None, field: str) -> None:
    words = "Failed on" if field == "failed_on" else "Last good on"
    if first is not None and day < first:
        raise BadValue(
            f"{words} {day_words(day)}, before it was fitted on {day_words(first)}. Enter a day from then on.",
            field=field,
        )
    if last is not None and day > last:
        end = "it came out" if field == "failed_on" else "it failed or came out"
        raise BadValue(
            f"{words} {day_words(day)}, after {end} on {day_words(last)}. Enter a day up to then.", field=field
        )


def check_cause(fitting: Fitting) -> None:
    """The part that broke this one: in the same module, at the same time, and not in turn broken by it."""
    cause = fitting.caused_by
    if cause is None:
        return
    if cause.module_id != fitting.module_id or cause.struck_out:
        raise BadValue(f"{cause.code} is no standing part of this module. Choose another cause.", field="caused_by")
    if fitting.reason != RemovalReason.TAKEN_WITH_ANOTHER:
        raise BadValue(
            "A part that another one broke is “taken with another”. Choose that reason, or leave the cause empty.",
            field="caused_by",
        )
    if apart(cause, fitting):
        raise BadValue(
            f"{cause.code} was not in the module together with this part. Choose another cause.", field="caused_by"
        )
    seen = {fitting.pk}
    step: Fitting | None = cause
    while step is not None:
        if step.pk in seen:
            raise BadValue(
                f"{cause.code} would have been broken by this part in turn. Choose another cause.", field="caused_by"
            )
        seen.add(step.pk)
        step = step.caused_by


def apart(one: Fitting, other: Fitting) -> bool:
    """Whether two stays share not even a day."""
    for early, late in ((one, other), (other, one)):
        if early.removed_on is not None and late.fitted_on is not None and early.removed_on < late.fitted_on:
            return True
    return False
