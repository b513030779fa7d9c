"""Does a redesign pay: the fleet with and without it, week by week, with the same draws and the same luck.

Without: every part fitted from now on is the old one. With: the new one, and modules still in the plan are upgraded at
its pace. The difference is counted in failures, and in money by the costs on the redesign and in the book's settings.
A redesign of several components is counted component by component, and its rollout is paid for once.
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
from reliability.redesigns.money_basis import Basis, Stretch, basis_of, lives_as

QUARTERS = 4
DRAWS = 200  # simulated fleets: their 80 % ends move by a few per cent with another seed
FloatArray = NDArray[np.float64]


@dataclass(frozen=True)
class Costs:
    """In the book's currency; a failure costs visits, bench hours and days of standstill, besides the part."""

    visits_a_failure: float
    visit: float
    bench_hours_a_failure: float
    bench_hour: float
    stop_days_a_failure: float
    stop_day: float
    module: float  # of the rollout, beyond the parts

    @property
    def failure(self) -> float:
        """What a failure costs beyond the part."""
        return (
            self.visits_a_failure * self.visit
            + self.bench_hours_a_failure * self.bench_hour
            + self.stop_days_a_failure * self.stop_day
        )


@dataclass(frozen=True)
class Side:
    """One component: the new part, the old one that would go in without it, all that it replaces, and what they cost.

    positions: of it in the modules that the plan has left.
    """

    component: Component
    new: str
    old: str
    replaced: tuple[str, ...]
    old_cost: float
    new_cost: float
    positions: int
    as_of: dt.date
    hope: float
    confidence: float = 0.95
    not_before: dt.date | None = None

    def asked(self) -> dict[str, Any]:
        return {name: getattr(self, name) for name in self.__dataclass_fields__} | {"component": self.component.code}


@dataclass(frozen=True)
class Plan:
    """What is left of the rollout: modules, and how many of them a week; None: all at once."""

    modules: int
    modules_a_week: float | None


@dataclass(frozen=True, eq=False)
class Weekly:
    """Failures avoided and money saved in each simulated fleet and week, (draws, weeks)."""

    avoided: FloatArray
    saved: FloatArray

    def __add__(self, other: Weekly) -> Weekly:
        return Weekly(self.avoided + other.avoided, self.saved + other.saved)


def kept_money(sides: tuple[Side, ...], costs: Costs, plan: Plan, rests_on: str = "") -> dict[str, Any]:
    """Computed once for each version of the data and each set of costs."""
    asked = {
        "sides": [side.asked() for side in sides],
        "costs": asdict(costs),
        "plan": asdict(plan),
        "rests_on": rests_on,
    }
    found: dict[str, Any] = kept("redesign money", asked, lambda: money_of(sides, costs, plan, rests_on))
    return found


def money_of(sides: tuple[Side, ...], costs: Costs, plan: Plan, rests_on: str = "") -> dict[str, Any]:
    """Failures and money avoided a quarter, and when the rollout is paid, each with its band; twice where the records
    bound a ratio from below: as estimated, and as if the new parts lived only so many times as long as the old ones.

    A component of which nothing runs, or whose old part has no life on record, is named and left out.
    """
    counted = {side.component.code: _counted(side, costs, plan, rests_on) for side in sides}
    there = {code: found for code, found in counted.items() if found is not None}
    if not there:
        return {"told": None}
    as_of, spent = sides[0].as_of, _spent(sides, costs, plan)
    told = {"as estimated": _told(_sum([found.estimated for found in there.values()]), spent, costs, as_of)}
    if any(found.cautious is not None for found in there.values()):
        # what has no lower bound of its own stands as it is assumed
        low = [found.cautious or found.estimated for found in there.values()]
        told["at the lower bound"] = _told(_sum(low), spent, costs, as_of)
    return {
        "told": told,
        "failure_cost": finite(costs.failure),
        "bases": {code: found.basis.told() for code, found in there.items()},
        "by_component": {code: _first_quarter(found.estimated) for code, found in there.items() if len(sides) > 1},
        "not_counted": [code for code in counted if code not in there],
    }


@dataclass(frozen=True, eq=False)
class _Counted:
    basis: Basis
    estimated: Weekly
    cautious: Weekly | None


def _counted(side: Side, costs: Costs, plan: Plan, rests_on: str) -> _Counted | None:
    taught = learned(side.component, side.as_of)
    question = question_of(side.component, begin=side.as_of, days=QUARTERS * WEEKS * WEEK, as_of=side.as_of)
    if not running_now(question).rows or side.old not in taught.designs:
        return None
    basis = basis_of(side, taught, rests_on)
    estimated = _weekly(question, lives_as(taught, side, basis.stretch), side, costs, plan)
    cautious = None
    if basis.lower is not None and basis.lower > 0:
        only = lives_as(taught, side, Stretch.known(basis.lower))
        cautious = _weekly(question, only, side, costs, plan)
    return _Counted(basis, estimated, cautious)


def _weekly(question: Question, taught: Learned, side: Side, costs: Costs, plan: Plan) -> Weekly:
    """Both fleets of one world: the new parts that run already live in both as long as `taught` says."""
    old = WhatIf(superseding=side.old, superseding_from=question.as_of)
    without = _failures(replace(question, what_if=old), taught)
    # No more than is left and paid for; without a pace all in the first week.
    pace = (plan.modules_a_week or plan.modules) * side.positions / plan.modules if plan.modules else None
    new = WhatIf(superseding=side.new, superseding_from=question.as_of, retrofit_a_week=pace or None)
    with_it = _failures(replace(question, what_if=new), taught, side.positions)
    saved = without * (costs.failure + side.old_cost) - with_it * (costs.failure + side.new_cost)
    return Weekly(without - with_it, saved)


def _failures(question: Question, taught: Learned, most_retrofits: float = math.inf) -> FloatArray:
    positions = positions_of(running_now(question).rows, question, taught)
    found = simulate(question, taught, positions, draws=DRAWS, most_retrofits=most_retrofits)
    return found.by_window[:, -QUARTERS * WEEKS :]


def _sum(weekly: list[Weekly]) -> Weekly:
    """Draw by draw: components fail of causes of their own."""
    return sum(weekly[1:], weekly[0])


def _told(weekly: Weekly, spent: FloatArray, costs: Costs, as_of: dt.date) -> dict[str, Any]:
    balance = np.cumsum(weekly.saved, axis=1) - spent
    failures, money = _quarterly(weekly.avoided), _quarterly(weekly.saved)
    return {
        "quarters": [
            {"failures_avoided": _band(failures[:, n]), "money_saved": _band(money[:, n])} for n in range(QUARTERS)
        ],
        "visits_avoided": _band(failures[:, 0] * costs.visits_a_failure),
        "bench_hours_avoided": _band(failures[:, 0] * costs.bench_hours_a_failure),
        "rollout_cost": finite(float(spent[-1])),
        "break_even": _break_even(balance, as_of),
        "balance": _band(balance[:, -1]),
    }


def _first_quarter(weekly: Weekly) -> dict[str, Any]:
    return {
        "failures_avoided": _band(_quarterly(weekly.avoided)[:, 0]),
        "money_saved": _band(_quarterly(weekly.saved)[:, 0]),
    }


def _spent(sides: tuple[Side, ...], costs: Costs, plan: Plan) -> FloatArray:
    """Cost of the rollout up to the end of each week; without a pace all of it at once. A module is paid for once."""
    weeks = QUARTERS * WEEKS
    whole = plan.modules * costs.module + sum(side.positions * side.new_cost for side in sides)
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
