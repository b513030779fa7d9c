"""Does a redesign pay: the fleet with and without it, week by week, with the same draws and the same luck.

Without: every part fitted from now on is the old one. With: the new one, and modules still in the plan are upgraded at
its pace. The difference is counted in failures, and in money by the costs on the redesign and in the book's settings.
"""

from __future__ import annotations

import datetime as dt
import math
from dataclasses import asdict, dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fleet.models import Component
from reliability.forecasts.count import simulate
from reliability.forecasts.horizon import WEEK, WEEKS
from reliability.forecasts.learned import Learned, learned
from reliability.forecasts.next_quarter import running_now
from reliability.forecasts.positions import positions_of
from reliability.forecasts.question import Question, question_of
from reliability.forecasts.what_if import WhatIf
from reliability.kept import kept
from reliability.life_answer import finite
from reliability.stats.kept_draws import KeptDraws

QUARTERS = 4
DRAWS = 200  # simulated fleets: their 80 % ends move by a few per cent with another seed
FloatArray = NDArray[np.float64]


@dataclass(frozen=True)
class Costs:
    """In the book's currency; a failure costs visits, bench hours and days of standstill, besides the part."""

    old_part: float
    new_part: float
    visits_a_failure: float
    visit: float
    bench_hours_a_failure: float
    bench_hour: float
    stop_days_a_failure: float
    stop_day: float
    module: float  # of the rollout, beyond the part

    @property
    def failure(self) -> float:
        """What a failure costs beyond the part."""
        return (
            self.visits_a_failure * self.visit
            + self.bench_hours_a_failure * self.bench_hour
            + self.stop_days_a_failure * self.stop_day
        )


@dataclass(frozen=True)
class Plan:
    """What is left of the rollout: modules, positions in them, and how many modules a week."""

    modules: int
    positions: int
    modules_a_week: float | None


def kept_money(component: Component, new: str, old: str, **choices: Any) -> dict[str, Any]:
    """Computed once for each version of the data and each set of costs."""
    asked = {
        "component": component.code,
        "new": new,
        "old": old,
        **{name: asdict(value) if hasattr(value, "__dataclass_fields__") else value for name, value in choices.items()},
    }
    found: dict[str, Any] = kept("redesign money", asked, lambda: money_of(component, new, old, **choices))
    return found


def money_of(
    component: Component,
    new: str,
    old: str,
    *,
    as_of: dt.date,
    costs: Costs,
    plan: Plan,
    lower_ratio: float | None = None,
    sites: list[str] | None = None,
) -> dict[str, Any]:
    """Failures and money avoided a quarter, and when the rollout is paid, each with its band; twice where
    `lower_ratio` is given: as estimated, and as if the new part lived only so many times as long as the old one.
    """
    taught = learned(component, as_of)
    question = question_of(component, begin=as_of, days=QUARTERS * WEEKS * WEEK, as_of=as_of, sites=sites)
    if not running_now(question).rows or old not in taught.designs:
        return {"told": None}
    found = {"as estimated": _told(question, taught, new, old, costs, plan)}
    found["as estimated"]["taken_ratio"] = _taken_ratio(taught, new, old)
    if lower_ratio is not None and lower_ratio > 0:
        cautious = _only_as_good(taught, new, old, lower_ratio)
        found["at the lower bound"] = _told(question, cautious, new, old, costs, plan)
    return {"told": found, "failure_cost": finite(costs.failure), "lower_ratio": finite(lower_ratio)}


def _weeks(question: Question, taught: Learned, most_retrofits: float = math.inf) -> FloatArray:
    """Failures by week in each simulated fleet, (draws, weeks)."""
    positions = positions_of(running_now(question).rows, question, taught)
    found = simulate(question, taught, positions, draws=DRAWS, most_retrofits=most_retrofits)
    return found.by_window[:, -QUARTERS * WEEKS :]


def _told(question: Question, taught: Learned, new: str, old: str, costs: Costs, plan: Plan) -> dict[str, Any]:
    """Both fleets of one world: the new parts that run already live in both as long as `taught` says."""
    without = _weeks(replace(question, what_if=WhatIf(superseding=old, superseding_from=question.as_of)), taught)
    # No more than is left and paid for; without a pace all in the first week.
    pace = (plan.modules_a_week or plan.modules) * plan.positions / plan.modules if plan.modules else None
    assumed = WhatIf(superseding=new, superseding_from=question.as_of, retrofit_a_week=pace or None)
    with_it = _weeks(replace(question, what_if=assumed), taught, plan.positions)
    avoided = without - with_it
    saved = without * (costs.failure + costs.old_part) - with_it * (costs.failure + costs.new_part)
    spent = _spent(costs, plan, without.shape[1])
    balance = np.cumsum(saved, axis=1) - spent
    failures, money = _quarterly(avoided), _quarterly(saved)
    return {
        "quarters": [
            {"failures_avoided": _band(failures[:, n]), "money_saved": _band(money[:, n])} for n in range(QUARTERS)
        ],
        "visits_avoided": _band(failures[:, 0] * costs.visits_a_failure),
        "bench_hours_avoided": _band(failures[:, 0] * costs.bench_hours_a_failure),
        "rollout_cost": finite(float(spent[-1])),
        "break_even": _break_even(balance, question.as_of),
        "balance": _band(balance[:, -1]),
    }


def _spent(costs: Costs, plan: Plan, weeks: int) -> FloatArray:
    """Cost of the rollout up to the end of each week; without a pace all of it at once."""
    whole = plan.modules * costs.module + plan.positions * costs.new_part
    if not plan.modules_a_week or not plan.modules:
        return np.full(weeks, whole)
    return whole * np.minimum(np.arange(1, weeks + 1) * plan.modules_a_week / plan.modules, 1.0)


def _quarterly(weekly: FloatArray) -> FloatArray:
    return weekly.reshape(len(weekly), QUARTERS, WEEKS).sum(axis=2)


def _band(values: FloatArray) -> dict[str, Any]:
    low, high = np.quantile(values, [0.1, 0.9])
    return {"mean": finite(float(values.mean())), "lower": finite(float(low)), "upper": finite(float(high))}


def _break_even(balance: FloatArray, as_of: dt.date) -> dict[str, Any]:
    """The first week after which savings stay above what was spent; None beyond the horizon."""
    stays = np.minimum.accumulate((balance >= 0)[:, ::-1], axis=1)[:, ::-1]
    week = np.where(stays.any(axis=1), stays.argmax(axis=1) + 1.0, np.inf)
    dates = [
        None if not np.isfinite(at) else (as_of + dt.timedelta(days=WEEK * int(at))).isoformat()
        for at in np.quantile(week, [0.1, 0.5, 0.9], method="nearest")
    ]
    return {
        "lower": dates[0],
        "estimate": dates[1],
        "upper": dates[2],
        "chance": float(np.isfinite(week).mean()),
        "quarters": QUARTERS,
    }


def _taken_ratio(taught: Learned, new: str, old: str) -> dict[str, Any] | None:
    """Median life of the new part over that of the old, as both are drawn for the count."""
    if new not in taught.designs:
        return None
    medians = []
    for part in (new, old):
        drawn = taught.designs[part].life.drawn
        medians.append(drawn.scales * np.log(2.0) ** (1.0 / drawn.shapes))
    # every draw of the one with every draw of the other: they are drawn apart
    low, middle, high = np.quantile(medians[0][:, None] / medians[1][None, :], [0.1, 0.5, 0.9])
    return {"estimate": finite(float(middle)), "lower": finite(float(low)), "upper": finite(float(high))}


def _only_as_good(taught: Learned, new: str, old: str, ratio: float) -> Learned:
    """The same knowledge, but the new part lives `ratio` times as long as the old one."""
    like = taught.designs[old]
    drawn = replace(like.life.drawn, scales=like.life.drawn.scales * ratio)
    life = KeptDraws(drawn, like.life.has_spread, like.life.failures)
    return replace(taught, designs={**taught.designs, new: replace(like, life=life, typical=like.typical * ratio)})
