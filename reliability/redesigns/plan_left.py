"""What is left of a rollout: modules of the plan that are not done, their positions, and the pace that was planned."""

from __future__ import annotations

from fleet.models import Redesign, RolloutStep
from fleet.rollout import upgraded_modules
from reliability.redesigns.money import Plan

WEEK = 7


def plan_left(redesign: Redesign) -> Plan:
    """The pace is that of the planned days; None where there are not two of them, or nothing is left."""
    steps = list(RolloutStep.objects.standing().filter(redesign=redesign).select_related("module"))
    done = upgraded_modules(redesign, ((step.module_id, step.module.type_id) for step in steps))
    left = [done[step.module_id] for step in steps if not done[step.module_id].done]
    days = sorted(step.planned_on for step in steps if step.planned_on)
    pace = None
    if left and len(set(days)) > 1:
        pace = len(days) / ((days[-1] - days[0]).days / WEEK + 1)
    return Plan(len(left), sum(each.positions - each.upgraded for each in left), pace)
