"""Where the next piece does the most good: money against pieces owed, over parts, depot and sites.

For one part and one stock at the depot each further piece at site i with s in stock saves P(X_i > s), which falls with
s: the best k pieces are the k greatest savings. The best split of n pieces is the least over the depot's share. Over
parts the pieces are bought in the order of saving per money along each part's lower convex hull, which gives the least
owed for the money at each of its corners (Sherbrooke 2004, Optimal Inventory Modeling of Systems, 2nd ed., ch. 2 and 5;
Fox 1966, Management Science 13, 210). Pipelines as in VARI-METRIC, see two_echelon.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import gammaln, xlogy

from reliability.stats.errors import InvalidArgument
from reliability.stats.two_echelon import Pipelines, backorders_by_moments, refuse_stock

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

MOST_PIECES = 400  # of one part on top of what is there
LEAST_OWED = 1e-4  # fewer than one module in ten thousand waiting: nothing left to gain
LEVELS = 5  # of uncertain demand in the search; the curve's figures use all that are given


@dataclass(frozen=True, eq=False)
class StockedPart:
    """One part: demand a unit of time at each site, (sites,), or in each of several draws of its level, (draws, sites).

    Times in the unit of demand. depot_stock and site_stock: what is kept already and stays where it is. may_keep:
    whether a site can keep any; one that cannot is served by the depot.
    """

    name: str
    demand: ArrayLike
    depot_time: float
    ship_time: ArrayLike
    unit_cost: float
    depot_stock: int = 0
    site_stock: ArrayLike | None = None
    may_keep: ArrayLike = True


@dataclass(frozen=True)
class StockPlan:
    """What of a part is kept at the depot and at each site, and the pieces owed with it: mean, and the 10 and 90 %
    points over the draws of demand's level (all equal for a single one).
    """

    depot_stock: int
    site_stock: tuple[int, ...]
    backorders: float
    lower: float
    upper: float

    @property
    def pieces(self) -> int:
        return self.depot_stock + sum(self.site_stock)


@dataclass(frozen=True)
class BuyingStep:
    """Buying `pieces` more of a part for `cost`, after which its plan is `plan`; money and backorders over all parts.

    money: spent in all; backorders: pieces owed over all parts and sites after the step; saving: pieces owed less for
    each unit of money.
    """

    part: str
    pieces: int
    cost: float
    money: float
    backorders: float
    saving: float
    plan: StockPlan


@dataclass(frozen=True)
class BuyingCurve:
    """From what is there (start: plans by part) by steps; `plans`: by part after the last step. left: of the budget."""

    start: dict[str, StockPlan]
    start_backorders: float
    steps: tuple[BuyingStep, ...]
    plans: dict[str, StockPlan]
    left: float


def marginal_analysis(parts: Sequence[StockedPart], budget: float) -> BuyingCurve:
    """The curve of money against pieces owed, up to the budget.

    A part whose next step no longer fits the budget is left; others go on. Stops where fewer than 0.0001 pieces of a
    part are owed, or after 400 pieces of it. Raises InvalidArgument.
    """
    if not (math.isfinite(budget) and budget >= 0):
        raise InvalidArgument(f"The budget is {budget:g}; it must be finite and at least 0.")
    names = [part.name for part in parts]
    if len(set(names)) != len(names):
        raise InvalidArgument("Two parts have the same name; each must be given once.")
    ladders = {part.name: _Ladder(part, budget) for part in parts}
    start = {name: ladder.plan(0) for name, ladder in ladders.items()}
    plans, spent = dict(start), 0.0
    owed = start_owed = sum(plan.backorders for plan in start.values())
    places = dict.fromkeys(ladders, 0)
    waiting = {name for name, ladder in ladders.items() if len(ladder.corners) > 1}
    steps = []
    while waiting:
        name = max(sorted(waiting), key=lambda each: ladders[each].saving(places[each]))
        ladder, place = ladders[name], places[name]
        pieces = ladder.corners[place + 1] - ladder.corners[place]
        cost = pieces * ladder.cost
        if spent + cost > budget * (1.0 + 1e-12):
            waiting.discard(name)
            continue
        plan = ladder.plan(ladder.corners[place + 1])
        spent, owed = spent + cost, owed + plan.backorders - plans[name].backorders
        steps.append(BuyingStep(name, pieces, cost, spent, max(owed, 0.0), ladder.saving(place), plan))
        plans[name], places[name] = plan, place + 1
        if place + 2 == len(ladder.corners):
            waiting.discard(name)
    return BuyingCurve(start, start_owed, tuple(steps), plans, max(budget - spent, 0.0))


def best_split(part: StockedPart, pieces: int) -> StockPlan:
    """The split of so many pieces over depot and sites, on top of what stays where it is, with the least owed.

    At most 400 pieces. Raises InvalidArgument.
    """
    if pieces != int(pieces) or not 0 <= pieces <= MOST_PIECES:
        raise InvalidArgument(f"{pieces:g} pieces are to be split; give a whole number from 0 to {MOST_PIECES}.")
    return _Ladder(part, math.inf).plan(int(pieces))


class _Ladder:
    """One part: the least owed for each number of further pieces, and the corners of its convex hull."""

    def __init__(self, part: StockedPart, budget: float) -> None:
        self.cost = float(part.unit_cost)
        if not (math.isfinite(self.cost) and self.cost > 0):
            raise InvalidArgument(f"{part.name} costs {self.cost:g}; give a price above 0.")
        demand = np.atleast_2d(np.asarray(part.demand, dtype=np.float64))
        self.worlds = [Pipelines(each, part.depot_time, part.ship_time) for each in demand]
        self.depot, self.sites = int(part.depot_stock), _stock_of(part, demand.shape[1])
        self.may_keep = np.broadcast_to(np.asarray(part.may_keep, dtype=bool), self.sites.shape)
        # levels of demand in order, a few of them for the search
        order = np.argsort([world.depot + world.direct.sum() for world in self.worlds], kind="stable")
        middle = (np.arange(min(LEVELS, order.size)) + 0.5) / min(LEVELS, order.size)
        self._search = [self.worlds[order[int(place * order.size)]] for place in middle]
        at_sites, at_depot = self._useful()
        affordable = budget // self.cost if math.isfinite(budget) else MOST_PIECES
        self.most = int(min(MOST_PIECES, affordable, at_sites.sum() + at_depot))
        self._columns = int(min(self.most, at_sites.max(initial=0)))
        self._deepest = int(min(self.most, at_depot))
        self._owed, self._gains = self._tables()
        self._at_depot = self._best_split()
        self.corners = self._hull()

    def saving(self, place: int) -> float:
        """Pieces owed less for each unit of money on the way to the next corner."""
        here, there = self.corners[place], self.corners[place + 1]
        return (self.least[here] - self.least[there]) / ((there - here) * self.cost)

    def plan(self, pieces: int) -> StockPlan:
        """The best split of so many further pieces, with its figures over all draws; useless ones lie at the depot."""
        useful = min(pieces, self.most)
        extra = int(self._at_depot[useful])
        chosen = self._chosen(extra, useful - extra)
        sites, extra = self.sites + chosen, pieces - int(chosen.sum())
        owed = []
        for world in self.worlds:
            mean, variance = self._moments(world, self.depot + extra)
            owed.append(float(backorders_by_moments(mean, variance, sites).sum()))
        lower, upper = np.quantile(owed, [0.1, 0.9])
        return StockPlan(self.depot + extra, tuple(map(int, sites)), float(np.mean(owed)), float(lower), float(upper))

    def _useful(self) -> tuple[IntArray, int]:
        """Further pieces at each site and at the depot beyond which hardly anything can be owed: five deviations."""
        reached, deepest = np.zeros(self.sites.size), 0.0
        for world in self._search:
            mean, variance = self._moments(world, self.depot)
            reached = np.maximum(reached, mean + 5.0 * np.sqrt(variance) + 3.0)
            deepest = max(deepest, world.depot + 5.0 * math.sqrt(world.depot) + 3.0)
        at_sites = np.ceil(np.maximum(reached - self.sites, 0.0)).astype(np.int64) * self.may_keep
        return at_sites, math.ceil(max(deepest - self.depot, 0.0))

    @staticmethod
    def _moments(world: Pipelines, depot_stock: int) -> tuple[FloatArray, FloatArray]:
        mean, variance = world.depot_backorders(depot_stock)
        pipeline = world.direct + world.share * mean
        return pipeline, pipeline + world.share**2 * (variance - mean)

    def _tables(self) -> tuple[FloatArray, FloatArray]:
        """For 0 ... deepest more at the depot: what is owed with none more at the sites, (deepest + 1,), and what each
        further piece at each site saves, (deepest + 1, sites, columns); less than nothing where none may be kept.
        """
        number = self._deepest + 1
        owed = np.zeros(number)
        gains = np.zeros((number, self.sites.size, self._columns))
        counts = np.arange(int(self.sites.max(initial=0)) + self._columns)
        picked = self.sites[:, None] + np.arange(self._columns)
        for world in self._search:
            moments = [self._moments(world, self.depot + extra) for extra in range(number)]
            mean, variance = (np.array([each[index] for each in moments]) for index in (0, 1))
            owed += backorders_by_moments(mean, variance, self.sites).sum(axis=1)
            if self._columns:
                above = 1.0 - np.cumsum(_pmf(mean[:, :, None], variance[:, :, None], counts), axis=2)
                gains += np.maximum(np.take_along_axis(above, picked[None], axis=2), 0.0)
        gains[:, ~self.may_keep] = -len(self._search)
        return owed / len(self._search), gains / len(self._search)

    def _best_split(self) -> IntArray:
        """Of 0 ... most further pieces, how many go to the depot; sets `least`, what is then owed."""
        number = self._deepest + 1
        falling = -np.sort(-self._gains.reshape(number, -1), axis=1)[:, : self.most]
        owed = self._owed[:, None] - np.concatenate([np.zeros((number, 1)), np.cumsum(falling, axis=1)], axis=1)
        extra, pieces = np.arange(number)[:, None], np.arange(self.most + 1)[None, :]
        at_sites = pieces - extra
        possible = (at_sites >= 0) & (at_sites < owed.shape[1])
        table = np.where(possible, owed[extra, np.clip(at_sites, 0, owed.shape[1] - 1)], np.inf)
        best = table.argmin(axis=0)
        self.least = np.maximum(np.minimum.accumulate(table[best, pieces[0]]), 0.0)
        return best

    def _chosen(self, extra: int, pieces: int) -> IntArray:
        """How many of the further pieces go to each site."""
        if not pieces:
            return np.zeros(self.sites.size, dtype=np.int64)
        order = np.argsort(-self._gains[extra], axis=None, kind="stable")[:pieces]
        return np.bincount(order // self._columns, minlength=self.sites.size)

    def _hull(self) -> list[int]:
        """Corners of the lower convex hull of what is owed, from 0 further pieces to where nothing is left to gain."""
        corners: list[int] = []
        for n in range(self.most + 1):
            while len(corners) >= 2:
                a, b = corners[-2], corners[-1]
                if (self.least[b] - self.least[a]) * (n - a) < (self.least[n] - self.least[a]) * (b - a):
                    break
                corners.pop()
            corners.append(n)
            if self.least[n] < LEAST_OWED:
                break
        while len(corners) >= 2 and self.least[corners[-2]] - self.least[corners[-1]] <= 1e-12:
            corners.pop()
        return corners


def _stock_of(part: StockedPart, sites: int) -> IntArray:
    kept = np.zeros(sites) if part.site_stock is None else np.asarray(part.site_stock, dtype=np.float64)
    if kept.shape != (sites,):
        raise InvalidArgument(f"{part.name}: stock is given for {kept.size} sites and demand for {sites}.")
    refuse_stock(kept, "stock at a site")
    refuse_stock(np.asarray(part.depot_stock, dtype=np.float64), "stock at the depot")
    if np.shape(part.may_keep) not in ((), (sites,)):
        raise InvalidArgument(f"{part.name}: may_keep must be one answer, or one for each of the {sites} sites.")
    return kept.astype(np.int64)


def _pmf(mean: FloatArray, variance: FloatArray, counts: IntArray) -> FloatArray:
    """Negative binomial with these moments, Poisson where the variance is not above the mean."""
    spread = variance > mean * (1.0 + 1e-8)
    p = np.where(spread, mean / np.where(spread, variance, 1.0), 0.5)
    size = np.where(spread, mean * p / (1.0 - p), 1.0)
    log_factorial = gammaln(counts + 1.0)
    logs = gammaln(counts + size) - gammaln(size) + size * np.log(p) + xlogy(counts, 1.0 - p)
    return np.exp(np.where(spread, logs, xlogy(counts, mean) - mean) - log_factorial)
