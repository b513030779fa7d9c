"""What is left of a rollout: modules of the plan that are not done, and the pace that was planned."""

from __future__ import annotations

from fleet.models import Redesign, RolloutStep
from fleet.rollout import positions_left, upgraded_modules
from reliability.redesigns.money import Plan

WEEK = 7


def plan_left(redesign: Redesign) -> tuple[Plan, dict[int, int]]:
    """And by component how many of its positions in those modules do not hold the new part yet.

    The pace is that of the planned days; None where there are not two of them, or nothing is left.
    """
    steps = list(
        RolloutStep.objects.standing().filter(redesign=redesign, module__scrapped_on=None).select_related("module")
    )
    modules = [(step.module_id, step.module.type_id) for step in steps]
    done = upgraded_modules(redesign, modules)
    left = [(module, kind) for module, kind in modules if not done[module].done]
    days = sorted(step.planned_on for step in steps if step.planned_on)
    pace = None
    if left and len(set(days)) > 1:
        pace = len(days) / ((days[-1] - days[0]).days / WEEK + 1)
    return Plan(len(left), pace), positions_left(redesign, left)
