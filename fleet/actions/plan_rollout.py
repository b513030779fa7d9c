"""Modules put into a rollout's plan, moved to another day, or taken out of it."""

from __future__ import annotations

import datetime as dt
from collections.abc import Sequence

from django.db.models import Max

from fleet.actions.base import change, sees
from fleet.actions.changed_since import check_version
from fleet.actions.checks_values import clean_planned_day
from fleet.actions.correct_record import clean_reason
from fleet.actions.errors import AlreadyDone, BadValue, NotAllowed, day_words
from fleet.actions.strike import strike
from fleet.actions.writes import save_again
from fleet.history import create_many
from fleet.models import Module, Person, Redesign, RolloutStep
from fleet.rights import LIFE

WEEK = 7
MOST_A_WEEK = 10_000
LATEST = dt.date(2200, 1, 1)  # of the last module at a slow pace


def plan_rollout(
    *,
    by: Person | None,
    redesign: Redesign,
    modules: Sequence[Module],
    first_on: dt.date | None = None,
    modules_a_week: int | None = None,
) -> list[RolloutStep]:
    """Puts modules at the end of the plan in the order given; those already in it stay where they are.

    With a first day and a pace each gets its planned day: so many a week, all of a week on its first day.
    """
    with change(by=by, right=LIFE, raises_version=False):
        redesign = Redesign.objects.select_for_update(of=("self",), no_key=True).get(pk=redesign.pk)
        check_pace(first_on, modules_a_week)
        for module in modules:
            if by is not None and not sees(by, module):
                raise NotAllowed(f"Module {module.code} does not stand at a site of yours. Leave it out.")
        planned = set(redesign.steps.standing().values_list("module_id", flat=True))
        new = [module for module in dict.fromkeys(modules) if module.pk not in planned]
        check_end(planned_day(first_on, modules_a_week, max(0, len(new) - 1)))
        last = redesign.steps.aggregate(last=Max("order"))["last"] or 0
        steps = [
            RolloutStep(
                redesign=redesign,
                module=module,
                order=last + place + 1,
                planned_on=planned_day(first_on, modules_a_week, place),
            )
            for place, module in enumerate(new)
        ]
        create_many(steps, RolloutStep)
    return list(redesign.steps.standing().filter(order__gt=last)) if steps else []


def check_pace(first_on: dt.date | None, modules_a_week: int | None, field: str = "first_on") -> None:
    clean_planned_day(first_on, field=field)
    if modules_a_week is None:
        return
    if not 1 <= modules_a_week <= MOST_A_WEEK:
        raise BadValue(
            f"{modules_a_week} modules a week is out of range. Enter 1 to {MOST_A_WEEK}.", field="modules_a_week"
        )
    if first_on is None:
        raise BadValue("The first day is missing. Enter it with the pace.", field="first_on")


def check_end(last: dt.date | None) -> None:
    if last is not None and last >= LATEST:
        raise BadValue(
            f"At this pace the last module would get its part on {day_words(last)}. Enter more modules a week.",
            field="modules_a_week",
        )


def planned_day(first_on: dt.date | None, modules_a_week: int | None, place: int) -> dt.date | None:
    if first_on is None or modules_a_week is None:
        return first_on
    return first_on + dt.timedelta(days=WEEK * (place // modules_a_week))


def move_step(
    *, by: Person | None, step: RolloutStep, planned_on: dt.date | None, version: int | None = None
) -> RolloutStep:
    """Another planned day for one module; empty: no day yet."""
    with change(by=by, right=LIFE, raises_version=False):
        step = opened(step, by)
        check_pace(planned_on, None, "planned_on")
        if step.planned_on == planned_on:
            return step
        check_version(step, version)
        step.planned_on = planned_on
        return save_again(step, {"planned_on"})


def drop_step(*, by: Person | None, step: RolloutStep, reason: str, version: int | None = None) -> RolloutStep:
    """Takes one module out of the plan, with the reason; what was fitted in it stays on record."""
    reason = clean_reason(reason)
    with change(by=by, right=LIFE, raises_version=False, reason=reason):
        step = opened(step, by)
        check_version(step, version)
        return strike(step, by, reason)


def opened(step: RolloutStep, by: Person | None) -> RolloutStep:
    step = RolloutStep.objects.select_for_update(of=("self",), no_key=True).get(pk=step.pk)
    if by is not None and not sees(by, step.module):
        raise NotAllowed(f"Module {step.module.code} does not stand at a site of yours.")
    if step.struck_out:
        raise AlreadyDone(f"{step.module.code} was taken out of the plan already: {step.struck_out}.")
    return step
