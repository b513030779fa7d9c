"""At which age planned replacement costs least for a design of a component, in money a quarter for the fleet.

Lives are those of the records; sites weigh as they use the parts (units of the clock a day). Costs of a failure and of
a planned replacement are the office's. Method: `reliability.stats.replacement_posterior`.
"""

from __future__ import annotations

import datetime as dt
from collections import defaultdict
from dataclasses import dataclass
from math import isfinite
from typing import TYPE_CHECKING, Any

from fleet.models import Component
from reliability.forecasts.horizon import WEEK, WEEKS
from reliability.forecasts.learned import learned
from reliability.kept import kept
from reliability.running_parts import RunningRow, running_parts

if TYPE_CHECKING:
    from reliability.stats.kept_draws import KeptDraws
    from reliability.stats.replacement_posterior import ReplacementCosts

DRAWS = 200
QUARTER = WEEKS * WEEK
FLAT_WITHIN = 0.03


@dataclass(frozen=True)
class ReplacementQuestion:
    """`part` None: the design that most positions get next. Costs in the book's currency, visits in days."""

    component: Component
    as_of: dt.date
    planned_cost: float
    failure_cost: float
    part: str | None = None
    visit_every_days: int | None = None
    sites: tuple[str, ...] | None = None

    def asked(self) -> dict[str, Any]:
        return {
            "component": self.component.code,
            "as_of": self.as_of.isoformat(),
            "planned_cost": self.planned_cost,
            "failure_cost": self.failure_cost,
            "part": self.part,
            "visit_every_days": self.visit_every_days,
            "sites": list(self.sites) if self.sites is not None else None,
        }


def kept_replacement(question: ReplacementQuestion) -> dict[str, Any]:
    """The document, computed once for each version of the data."""
    found: dict[str, Any] = kept("planned replacement", question.asked(), lambda: replacement_document(question))
    return found


def replacement_document(question: ReplacementQuestion) -> dict[str, Any]:
    """`told` is None where nothing can be said: nothing runs, or no life or failure of the design is on record."""
    sites = None if question.sites is None else list(question.sites)
    running = running_parts(question.component, as_of=question.as_of, sites=sites)
    use: dict[str, dict[str, float]] = defaultdict(lambda: defaultdict(float))
    for row in running.rows:
        use[row.needed][row.site] += row.a_day * row.count
    counts = positions_by_design(running.rows)
    part = question.part or max(counts, key=lambda code: counts[code], default=None)
    document = {
        **question.asked(),
        "clock": question.component.clock,
        "part": part,
        "designs": sorted(counts),
        "positions": counts.get(part, 0) if part else 0,
        "failures_seen": 0,
        "use_a_day": sum(use[part].values()) if part else 0.0,
        "oldest": max((row.age for row in running.rows), default=0.0),
        "told": None,
    }
    if not part or document["use_a_day"] <= 0:
        return document
    design = learned(question.component, question.as_of).designs.get(part)
    document["failures_seen"] = design.failures if design is not None else 0
    if design is None or not design.failures:
        return document
    pace = document["use_a_day"] / document["positions"]
    return {**document, "told": _told(question, design.life, dict(use[part]), pace)}


def positions_by_design(rows: list[RunningRow]) -> dict[str, int]:
    """Positions by the design that goes in next."""
    counts: dict[str, int] = defaultdict(int)
    for row in rows:
        counts[row.needed] += row.count
    return dict(counts)


def _told(question: ReplacementQuestion, life: KeptDraws, use: dict[str, float], pace: float) -> dict[str, Any]:
    import numpy as np

    from reliability.stats.replacement_posterior import replacement_costs

    every = question.visit_every_days
    found = replacement_costs(
        life.draws(DRAWS, np.random.default_rng(0)),
        question.planned_cost,
        question.failure_cost,
        sites={site: amount for site, amount in use.items() if amount > 0} if life.has_spread else None,
        visit_interval=None if every is None else every * pace,
        flat_within=FLAT_WITHIN,
    )
    return {**_plain(found, sum(use.values()) * QUARTER), "pace": pace}


def _plain(found: ReplacementCosts, quarter: float) -> dict[str, Any]:
    """As JSON holds it: costs for `quarter` units of use, None for an age that never comes."""

    def age(value: float) -> float | None:
        return float(value) if isfinite(value) else None

    return {
        "age": age(found.age),
        "age_band": [age(found.age_lower), age(found.age_upper)],
        "flat": [age(found.flat[0]), age(found.flat[1])],
        "flat_within": found.flat_within,
        "cost": found.cost_rate * quarter,
        "never": found.never * quarter,
        "never_band": [end * quarter for end in found.never_band],
        "saving": found.saving,
        "saving_band": list(found.saving_band),
        "chance": found.chance,
        "pays": found.pays,
        "level": found.level,
        "curve": {
            "age": found.ages.tolist(),
            **{
                name: (values * quarter).tolist()
                for name, values in (("cost", found.curve), ("lower", found.lower), ("upper", found.upper))
            },
        },
    }
