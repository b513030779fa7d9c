"""Where to keep spares: money against modules that stand still for want of a part, from plain values.

Long-run averages at today's pace of use, one piece reordered for each used; not a forecast of the coming weeks. A
piece owed at a site is a module waiting there. The depot is resupplied by the supplier, the sites by the depot.
"""

from __future__ import annotations

import math
from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.special import gammaincinv

from reliability.stats.count_results import CountDistribution
from reliability.stats.two_echelon_money import BuyingCurve, StockedPart, StockPlan, best_split, marginal_analysis

LEVELS = 15  # of use, equally likely: what the band over the forecast's uncertainty rests on


@dataclass(frozen=True)
class PlacedPart:
    """One part. use_a_day: pieces at each site, expected; level_spread: relative deviation of its common level (see
    level_spread_of). supplier_days: mean lead time of the depot's orders. at_depot, at_sites: what is kept now.
    """

    part: str
    name: str
    unit_cost: float
    use_a_day: Mapping[str, float]
    supplier_days: float
    level_spread: float = 0.0
    at_depot: int = 0
    at_sites: Mapping[str, int] | None = None


@dataclass(frozen=True)
class Waiting:
    """Modules waiting for a part on average, and between what it lies in 80 of 100 cases of the uncertain use."""

    mean: float
    lower: float
    upper: float


@dataclass(frozen=True)
class Purchase:
    """One step on the curve: what to buy and where it goes; a negative number is moved away from there."""

    part: str
    name: str
    pieces: int
    cost: float
    money: float
    waiting: Waiting
    changes: tuple[tuple[str, int], ...]


@dataclass(frozen=True)
class Better:
    """The same pieces of a part kept elsewhere: what changes, and what waits before and after."""

    part: str
    name: str
    before: float
    after: float
    changes: tuple[tuple[str, int], ...]


@dataclass(frozen=True)
class StockPlaces:
    """now: with what is kept today; by_part: the same, a part; curve: purchases in the order of their good for money;
    moves: parts of which moving what is there would help; left: of the budget.
    """

    sites: tuple[str, ...]
    depot: str
    now: Waiting
    by_part: dict[str, Waiting]
    curve: tuple[Purchase, ...]
    moves: tuple[Better, ...]
    budget: float
    left: float

    def document(self) -> dict[str, Any]:
        """As plain values."""

        def told(waiting: Waiting) -> dict[str, float]:
            return {"mean": waiting.mean, "lower": waiting.lower, "upper": waiting.upper}

        return {
            "now": told(self.now),
            "by_part": {part: told(waiting) for part, waiting in self.by_part.items()},
            "curve": [
                {
                    "part": step.part,
                    "pieces": step.pieces,
                    "cost": step.cost,
                    "money": step.money,
                    "waiting": told(step.waiting),
                    "changes": [{"place": place, "pieces": pieces} for place, pieces in step.changes],
                }
                for step in self.curve
            ],
            "moves": [
                {
                    "part": move.part,
                    "before": move.before,
                    "after": move.after,
                    "changes": [{"place": place, "pieces": pieces} for place, pieces in move.changes],
                }
                for move in self.moves
            ],
            "budget": self.budget,
            "left": self.left,
        }


def stock_places(
    parts: Sequence[PlacedPart],
    ship_days: Mapping[str, float],
    budget: float,
    *,
    depot: str = "depot",
    stores: Collection[str] | None = None,
) -> StockPlaces:
    """ship_days: from the depot to each site; use elsewhere is not counted. stores: the sites that can keep spares, all
    of them if None; the others are served by the depot.
    """
    sites = tuple(sorted(ship_days))
    ship = np.array([ship_days[site] for site in sites], dtype=np.float64)
    keep = np.array([stores is None or site in stores for site in sites], dtype=bool)
    stocked = {part.part: _stocked(part, sites, ship, keep) for part in parts}
    found = marginal_analysis(list(stocked.values()), budget)
    names = {part.part: part.name for part in parts}
    return StockPlaces(
        sites=sites,
        depot=depot,
        now=_together(found.start.values()),
        by_part={part: _of(plan) for part, plan in found.start.items()},
        curve=_curve(found, names, sites, depot),
        moves=_moves(parts, stocked, found, sites, depot),
        budget=float(budget),
        left=found.left,
    )


def level_spread_of(total: CountDistribution) -> float:
    """How uncertain the level of use is, relative: what a forecast's total spreads more than Poisson chance does."""
    if total.mean <= 0:
        return 0.0
    return math.sqrt(max(total.standard_deviation**2 - total.mean, 0.0)) / total.mean


def _stocked(
    part: PlacedPart, sites: tuple[str, ...], ship: NDArray[np.float64], keep: NDArray[np.bool_]
) -> StockedPart:
    use = np.array([part.use_a_day.get(site, 0.0) for site in sites])
    kept = part.at_sites or {}
    return StockedPart(
        name=part.part,
        demand=levels(part.level_spread)[:, None] * use,
        depot_time=part.supplier_days,
        ship_time=ship,
        unit_cost=part.unit_cost,
        depot_stock=part.at_depot,
        site_stock=[kept.get(site, 0) for site in sites],
        may_keep=keep,
    )


def levels(spread: float) -> NDArray[np.float64]:
    """Equally likely levels around 1: the middles of a gamma distribution's equal shares, with exactly mean 1."""
    if spread <= 1e-6:
        return np.ones(1)
    shape = spread**-2
    found = gammaincinv(shape, (np.arange(LEVELS) + 0.5) / LEVELS) / shape
    return found / found.mean()


def _curve(found: BuyingCurve, names: dict[str, str], sites: tuple[str, ...], depot: str) -> tuple[Purchase, ...]:
    plans, steps = dict(found.start), []
    for step in found.steps:
        changes = _changes(plans[step.part], step.plan, sites, depot)
        plans[step.part] = step.plan
        steps.append(
            Purchase(
                step.part, names[step.part], step.pieces, step.cost, step.money, _together(plans.values()), changes
            )
        )
    return tuple(steps)


def _moves(
    parts: Sequence[PlacedPart],
    stocked: dict[str, StockedPart],
    found: BuyingCurve,
    sites: tuple[str, ...],
    depot: str,
) -> tuple[Better, ...]:
    """Parts that would serve at least a twentieth better, and a hundredth of a module, if they lay elsewhere."""
    moves = []
    for part in parts:
        now = found.start[part.part]
        if not 0 < now.pieces <= 400:
            continue
        best = best_split(replace(stocked[part.part], depot_stock=0, site_stock=None), now.pieces)
        if now.backorders - best.backorders > max(0.05 * now.backorders, 0.01):
            changes = _changes(now, best, sites, depot)
            moves.append(Better(part.part, part.name, now.backorders, best.backorders, changes))
    moves.sort(key=lambda move: move.after - move.before)
    return tuple(moves)


def _changes(before: StockPlan, after: StockPlan, sites: tuple[str, ...], depot: str) -> tuple[tuple[str, int], ...]:
    pairs = [(depot, after.depot_stock - before.depot_stock)]
    pairs += [(site, b - a) for site, a, b in zip(sites, before.site_stock, after.site_stock, strict=True)]
    return tuple((place, change) for place, change in pairs if change)


def _of(plan: StockPlan) -> Waiting:
    return Waiting(plan.backorders, plan.lower, plan.upper)


def _together(plans: Any) -> Waiting:
    """Sums; each part's level is uncertain on its own, so spreads add as squares, on either side."""
    plans = list(plans)
    mean = sum(plan.backorders for plan in plans)
    below = math.sqrt(sum(max(plan.backorders - plan.lower, 0.0) ** 2 for plan in plans))
    above = math.sqrt(sum(max(plan.upper - plan.backorders, 0.0) ** 2 for plan in plans))
    return Waiting(mean, max(mean - below, 0.0), mean + above)
