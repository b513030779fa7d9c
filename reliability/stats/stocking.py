"""How many to keep: order-up-to levels, backorders and fill rates, and what to order.

Running out means that a part is wanted and none is there. A level S keeps its promise over a span with the chance
P(D <= S), D the demand over that span. Everything ordered today comes after the lead time, and what is not ordered
today can be ordered at the next review: the span to cover is lead time plus review period (Silver, Pyke & Thomas
2017, Inventory and Production Management in Supply Chains, 4th ed., section 6.9, the (R, S) system).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import pdtr, pdtrc

from reliability.stats.count_results import CountDistribution
from reliability.stats.errors import InvalidArgument
from reliability.stats.stocking_paths import DemandPaths
from reliability.stats.two_echelon import two_echelon_backorders

FloatArray = NDArray[np.float64]

__all__ = [
    "OrderQuantity",
    "backorders_of",
    "demand_over_lead_time",
    "expected_backorders",
    "fill_rate",
    "mixed_demand",
    "order_quantity",
    "order_up_to",
    "two_echelon_backorders",
]


def order_up_to(demand_pmf: ArrayLike, service_level: float) -> int:
    """Smallest S with P(D <= S) >= service_level: the stock that is enough in that share of cases.

    demand_pmf: chances of 0, 1, 2 ... pieces over the span to cover, (n,). Raises InvalidArgument.
    """
    if not 0.0 < service_level < 1.0:
        raise InvalidArgument(
            f"The wanted chance of not running out is {service_level:g}; it must lie between 0 and 1, "
            "because no stock is enough for certain."
        )
    return CountDistribution(_pmf(demand_pmf)).quantile(service_level)


def demand_over_lead_time(paths: DemandPaths, lead_time_pmf: ArrayLike, *, review_days: int = 0) -> CountDistribution:
    """Demand over a random lead time plus the review period: sum over t of P(lead time = t) P(D(t + review) = k).

    paths: cumulative demand by day in each predictive draw, dependence between days kept. lead_time_pmf: chances
    that an order of today comes on day 0, 1, 2 ..., (m,), independent of demand. The lead time is integrated out, not
    drawn; the paths must reach the last day with any chance (see DemandPaths.reaching). Raises InvalidArgument.
    """
    chances = _pmf(lead_time_pmf)
    _refuse_count(review_days, "review period in days")
    last = int(np.flatnonzero(chances)[-1]) + int(review_days)
    if last > paths.days:
        raise InvalidArgument(
            f"The demand is known for {paths.days} days; lead time and review reach {last}. Ask for a longer forecast."
        )
    reached = paths.cumulative[:, : last + 1]
    found = np.zeros(int(reached[:, -1].max(initial=0)) + 1)
    for day in np.flatnonzero(chances):
        counts = np.bincount(reached[:, day + int(review_days)])
        found[: counts.size] += chances[day] * counts / paths.draws
    return CountDistribution(found / found.sum())


def mixed_demand(pmfs: Sequence[ArrayLike], weights: ArrayLike) -> CountDistribution:
    """Mixture of demand distributions, weights (m,) adding up to 1: for exact counts at each possible lead time.

    pmfs[j]: chances of 0, 1, 2 ... pieces if case j holds. A mixture keeps what a convolution of independent weeks
    loses: that a draw which fails often in one week does so in the next. Raises InvalidArgument.
    """
    share = _pmf(weights)
    if len(pmfs) != share.size:
        raise InvalidArgument(f"{len(pmfs)} distributions and {share.size} weights are given; give one for each.")
    checked = [_pmf(each) for each in pmfs]
    found = np.zeros(max(each.size for each in checked))
    for each, part in zip(checked, share, strict=True):
        found[: each.size] += part * each
    return CountDistribution(found)


def expected_backorders(mean: ArrayLike, stock: ArrayLike) -> FloatArray:
    """E (X - s)+ for X Poisson(mean): pieces owed at a random moment when s are kept and each use is reordered.

    mean: pieces on the way, demand rate times resupply time (Palm 1938: Poisson whatever the resupply's
    distribution); stock: whole numbers of at least 0; broadcast together. = m P(X >= s) - s P(X > s).
    Sherbrooke 2004, Optimal Inventory Modeling of Systems, 2nd ed., ch. 2. Raises InvalidArgument.
    """
    pieces, kept = _pipeline(mean, stock)
    # P(X >= s) is 1 at s = 0, where the special function has no argument -1
    at_least = np.where(kept > 0, pdtrc(np.maximum(kept - 1.0, 0.0), pieces), 1.0)
    return np.maximum(pieces * at_least - kept * pdtrc(kept, pieces), 0.0)


def fill_rate(mean: ArrayLike, stock: ArrayLike) -> FloatArray:
    """P(X <= s - 1), X Poisson(mean): share of wishes that are met from the shelf at once. 0 at s = 0.

    Arguments as in expected_backorders. Sherbrooke 2004, ch. 2.
    """
    pieces, kept = _pipeline(mean, stock)
    return np.where(kept > 0, pdtr(np.maximum(kept - 1.0, 0.0), pieces), 0.0)


def backorders_of(demand_pmf: ArrayLike, stock: int) -> float:
    """E (D - s)+ for any distribution of demand, chances of 0, 1, 2 ... (n,)."""
    pmf = _pmf(demand_pmf)
    _refuse_count(stock, "stock")
    short = np.arange(pmf.size) - stock
    return float(pmf[short > 0] @ short[short > 0])


@dataclass(frozen=True)
class OrderQuantity:
    """What to order today: pieces; how many were wanting; and what pack and minimum added."""

    quantity: int
    wanting: int
    added: int


def order_quantity(level: int, on_hand: int, on_order: int, *, pack: int = 1, minimum: int = 0) -> OrderQuantity:
    """Level less what is on hand and on order, raised to the smallest order and to whole packs; nothing if enough.

    on_hand may be below 0 where a store allows it: what is owed is ordered too. Raises InvalidArgument.
    """
    for value, name in ((level, "level"), (on_order, "number on order"), (minimum, "smallest order")):
        _refuse_count(value, name)
    if on_hand != int(on_hand):
        raise InvalidArgument(f"The number on hand is {on_hand:g}; it must be a whole number.")
    if pack != int(pack) or pack < 1:
        raise InvalidArgument(f"The pack is {pack:g}; it must be a whole number of at least 1.")
    wanting = max(0, int(level) - int(on_hand) - int(on_order))
    quantity = math.ceil(max(wanting, minimum) / pack) * int(pack) if wanting else 0
    return OrderQuantity(quantity, wanting, quantity - wanting)


def _pipeline(mean: ArrayLike, stock: ArrayLike) -> tuple[FloatArray, FloatArray]:
    pieces, kept = np.broadcast_arrays(np.asarray(mean, dtype=np.float64), np.asarray(stock, dtype=np.float64))
    if not (np.isfinite(pieces).all() and (pieces >= 0).all()):
        raise InvalidArgument("The mean number on the way must be finite and at least 0.")
    if not (np.isfinite(kept).all() and (kept >= 0).all() and (kept == np.floor(kept)).all()):
        raise InvalidArgument("Stock must be whole numbers of at least 0.")
    return pieces, kept


def _pmf(values: ArrayLike) -> FloatArray:
    pmf = np.asarray(values, dtype=np.float64)
    if pmf.ndim != 1 or not pmf.size or not np.isfinite(pmf).all() or (pmf < -1e-9).any():
        raise InvalidArgument("Chances must be a list of numbers of at least 0.")
    if abs(float(pmf.sum()) - 1.0) > 1e-6:
        raise InvalidArgument(f"Chances add up to {float(pmf.sum()):g}; they must add up to 1.")
    return np.maximum(pmf, 0.0)


def _refuse_count(value: float, name: str) -> None:
    if not math.isfinite(value) or value != int(value) or value < 0:
        raise InvalidArgument(f"The {name} is {value:g}; it must be a whole number of at least 0.")
