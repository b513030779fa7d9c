"""What to order today, part by part, from plain values: the shelf, what is due, past lead times, drawn use.

Each line covers lead time plus review period: what is not ordered today can be ordered at the next review and then has
to come. Use is drawn by week from the forecast, so its uncertainty and the way weeks hang together are in it. Nothing
here reads records; callers bring them.
"""

from __future__ import annotations

import datetime as dt
import math
from collections.abc import Mapping, Sequence
from dataclasses import asdict, dataclass, field
from decimal import Decimal
from typing import Any

import numpy as np
from numpy.typing import NDArray

from reliability.stats.count_results import CountDistribution
from reliability.stats.lead_times import DurationPosterior, learned_durations
from reliability.stats.stocking import OrderQuantity, backorders_of, demand_over_lead_time, order_quantity, order_up_to
from reliability.stats.stocking_paths import DemandPaths, Receipt, RunningOut, daily_paths, running_out

BANDS = (0.5, 0.8, 0.95)
TELL_AT = 0.05  # the chance of running out that a planner is told the day of
LONGEST_LEAD = 0.998  # share of the lead times that is looked at; the rest counts as the last of them
MOST_DAYS = 900
PROMISE_SPREAD = 0.2  # a promise is kept within about a fifth of its time, until past ones tell otherwise


@dataclass(frozen=True)
class Due:
    """What is on order and not received yet. due_on: the supplier's promise for this order, if there is one."""

    quantity: int
    ordered_on: dt.date
    due_on: dt.date | None = None


@dataclass(frozen=True)
class PastDelivery:
    """One delivery: days from the order, the share of the order's quantity that it brought, and after how many days
    it was promised, where it was.
    """

    days: float
    share: float = 1.0
    promised_days: float | None = None


@dataclass(frozen=True)
class Shelf:
    """One part in all stores together (or one store). lead_time_days: the catalogue's figure, None if not known.
    minimum: the smallest order; keep_at_least: pieces that the book wants on the shelf in any case.
    """

    part: str
    name: str
    on_hand: int
    due: tuple[Due, ...] = ()
    deliveries: tuple[PastDelivery, ...] = ()
    lead_time_days: float | None = None
    pack: int = 1
    minimum: int = 0
    keep_at_least: int = 0
    unit_cost: Decimal | None = None
    supplier: str = ""
    superseded_by: str = ""  # the part that is fitted instead from `used_until` on
    used_until: dt.date | None = None
    none_failed: bool = False  # of its component so far: then an expected use would rest on the prior alone


@dataclass(frozen=True)
class Rules:
    """The book's settings."""

    today: dt.date
    review_days: int = 14
    service_level: float = 0.95
    seed: int = 0


@dataclass(frozen=True)
class DayRange:
    """A day and the two between which it lies in 80 of 100 cases; None: later than is looked at."""

    middle: dt.date | None
    first: dt.date | None
    last: dt.date | None


@dataclass(frozen=True)
class OrderLine:
    """What is known of one part and what to order.

    known: False where its use cannot be forecast; then only the shelf is told. use: pieces over `span_days` (lead time
    and review). reorder_level: at or below it an order cannot wait for the next review. chances: of wanting a part
    that is not there, if nothing is ordered: over the span, and before the next delivery (due, or ordered today).
    tell_on: the day by which that chance passes 5 %, None if it does not up to `looked_until`. cover_weeks: how long
    what is on hand lasts without deliveries (middle, 80 of 100 cases), None beyond what is looked at.
    """

    part: str
    name: str
    known: bool
    on_hand: int
    due: int
    supplier: str
    superseded_by: str
    looked_until: dt.date
    use_mean: float = 0.0
    use_bands: dict[str, tuple[int, int]] = field(default_factory=dict)
    span_days: float = 0.0
    order_up_to: int = 0
    reorder_level: int = 0
    quantity: int = 0
    wanting: int = 0
    added: int = 0
    pack: int = 1
    minimum: int = 0
    keep_at_least: int = 0
    unit_cost: Decimal | None = None
    cost: Decimal | None = None
    chance_if_nothing: float = 0.0
    chance_before_delivery: float = 0.0
    short_on_average: float = 0.0  # pieces wanting over the span if nothing is ordered, what is due counted as there
    tell_on: dt.date | None = None
    lasts: DayRange = DayRange(None, None, None)
    comes: DayRange = DayRange(None, None, None)  # an order placed today
    next_delivery: DayRange = DayRange(None, None, None)
    cover_weeks: tuple[float | None, float | None, float | None] = (None, None, None)
    left_over: tuple[float, int, int] | None = None  # mean and 80 of 100 cases, when a superseded part goes out of use
    used_until: dt.date | None = None
    none_failed: bool = False
    lead_orders: float = 0.0
    lead_figure: float | None = None
    service_level: float = 0.95
    carried_on: float = 0.0  # share of the cases in which the span reaches beyond the forecast

    def document(self) -> dict[str, Any]:
        """As plain values, days as text and money as text with its decimals."""
        return {key: _plain(value) for key, value in asdict(self).items()}


@dataclass(frozen=True)
class OrderList:
    """Lines, those that run out first in front; cost: of all quantities with a price; without_price: those without."""

    lines: tuple[OrderLine, ...]
    cost: Decimal
    without_price: tuple[str, ...]

    def document(self) -> dict[str, Any]:
        return {
            "lines": [line.document() for line in self.lines],
            "cost": str(self.cost),
            "without_price": list(self.without_price),
        }


def order_list(shelves: Sequence[Shelf], use: Mapping[str, NDArray[np.int64] | None], rules: Rules) -> OrderList:
    """use: drawn weekly use by part, (draws, weeks), the first week beginning tomorrow; missing where unknown."""
    lines = [order_line(shelf, use.get(shelf.part), rules) for shelf in shelves]
    lines.sort(key=lambda line: (line.quantity == 0, line.tell_on or dt.date.max, -line.chance_if_nothing, line.part))
    priced = [line.cost for line in lines if line.cost is not None]
    missing = tuple(line.part for line in lines if line.quantity and line.cost is None)
    return OrderList(tuple(lines), sum(priced, Decimal(0)), missing)


def order_line(shelf: Shelf, weekly: NDArray[np.int64] | None, rules: Rules) -> OrderLine:
    """One part's line; weekly: drawn use (draws, weeks) from tomorrow on, None where it cannot be forecast."""
    due = sum(each.quantity for each in shelf.due)
    lead = lead_times(shelf, rules.today)
    shared: dict[str, Any] = {
        "part": shelf.part, "name": shelf.name, "on_hand": shelf.on_hand, "due": due, "supplier": shelf.supplier,
        "superseded_by": shelf.superseded_by, "pack": shelf.pack, "minimum": shelf.minimum,
        "keep_at_least": shelf.keep_at_least, "unit_cost": shelf.unit_cost, "lead_orders": lead.completed,
        "lead_figure": shelf.lead_time_days, "used_until": shelf.used_until, "none_failed": shelf.none_failed,
        "service_level": rules.service_level,
    }  # fmt: skip
    if weekly is None:
        least = order_quantity(shelf.keep_at_least, shelf.on_hand, due, pack=shelf.pack, minimum=shelf.minimum)
        return OrderLine(
            known=False, looked_until=rules.today, comes=_comes(lead, rules.today), **_ordered(least, shelf), **shared
        )
    rng = np.random.default_rng([rules.seed, *shelf.part.encode()])
    most = int(min(math.ceil(lead.quantile(LONGEST_LEAD)), MOST_DAYS))
    known = daily_paths(weekly, rng)
    paths = known.reaching(most + rules.review_days, rng)
    by_day = lead.by_day(most)
    demand = demand_over_lead_time(paths, by_day, review_days=rules.review_days)
    level = max(order_up_to(demand.pmf, rules.service_level), shelf.keep_at_least)
    reorder = max(order_up_to(demand_over_lead_time(paths, by_day).pmf, rules.service_level), shelf.keep_at_least)
    order = order_quantity(level, shelf.on_hand, due, pack=shelf.pack, minimum=shelf.minimum)
    today_order = np.minimum(np.ceil(lead.draws(paths.draws, rng)), most).astype(np.int64)
    receipts = [_receipt(each, shelf, rules.today, paths, rng) for each in shelf.due]
    course = running_out(paths, shelf.on_hand, receipts)
    following = np.min([each.days for each in receipts], axis=0) if receipts else today_order
    over = course.day_over(TELL_AT)
    return OrderLine(
        known=True,
        looked_until=rules.today + dt.timedelta(days=paths.days),
        use_mean=demand.mean,
        use_bands={f"{band:g}": demand.interval(band) for band in BANDS},
        span_days=lead.median + rules.review_days,
        order_up_to=level,
        reorder_level=reorder,
        **_ordered(order, shelf),
        chance_if_nothing=course.chance_by(today_order + rules.review_days),
        chance_before_delivery=course.chance_before(following),
        short_on_average=backorders_of(demand.pmf, max(shelf.on_hand + due, 0)),
        tell_on=None if over is None else rules.today + dt.timedelta(days=over),
        lasts=_lasts(course, rules.today),
        comes=_comes(lead, rules.today),
        next_delivery=_days(following, rules.today, paths.days),
        cover_weeks=cover_weeks(running_out(paths, shelf.on_hand)),
        left_over=_left_over(shelf, due, paths, rules.today),
        carried_on=float(by_day[max(known.days - rules.review_days + 1, 0) :].sum()),
        **shared,
    )


def _ordered(order: OrderQuantity, shelf: Shelf) -> dict[str, Any]:
    cost = None if shelf.unit_cost is None else shelf.unit_cost * order.quantity
    return {"quantity": order.quantity, "wanting": order.wanting, "added": order.added, "cost": cost}


def lead_times(shelf: Shelf, today: dt.date) -> DurationPosterior:
    """Learned from past deliveries and open orders, with the catalogue's figure as prior."""
    return learned_durations(
        [each.days for each in shelf.deliveries],
        weights=[each.share for each in shelf.deliveries],
        still_open=[_gone(each, today) for each in shelf.due],
        figure=shelf.lead_time_days,
    )


def promises(shelf: Shelf, today: dt.date) -> DurationPosterior:
    """What deliveries take in hundredths of the time promised, learned from past promises and open ones."""
    kept = [each for each in shelf.deliveries if each.promised_days]
    waiting = [each for each in shelf.due if each.due_on is not None]
    return learned_durations(
        [100.0 * each.days / (each.promised_days or 1.0) for each in kept],
        weights=[each.share for each in kept],
        still_open=[100.0 * _gone(each, today) / _promised(each) for each in waiting],
        figure=100.0,
        figure_spread=PROMISE_SPREAD,
        usual_spread=PROMISE_SPREAD,
    )


def _receipt(due: Due, shelf: Shelf, today: dt.date, paths: DemandPaths, rng: np.random.Generator) -> Receipt:
    """When it comes in each future, later than today: by its promise and how such are kept, else by lead times."""
    gone = _gone(due, today)
    if due.due_on is None:
        whole = lead_times(shelf, today).draws(paths.draws, rng, beyond=gone)
    else:
        unit = _promised(due) / 100.0
        whole = unit * promises(shelf, today).draws(paths.draws, rng, beyond=gone / unit)
    days = np.clip(np.ceil(whole - gone), 1, paths.days + 1)
    return Receipt(due.quantity, days.astype(np.int64))


def _gone(due: Due, today: dt.date) -> float:
    return float(max((today - due.ordered_on).days, 0))


def _promised(due: Due) -> float:
    """Days from order to promise; a delivery promised for the day of its order still takes part of one."""
    assert due.due_on is not None
    return float(max((due.due_on - due.ordered_on).days, 1))


def _comes(lead: DurationPosterior, today: dt.date) -> DayRange:
    first, last = lead.interval(0.8)
    return DayRange(*(_day(today, math.ceil(min(days, MOST_DAYS))) for days in (lead.median, first, last)))


def _lasts(course: RunningOut, today: dt.date) -> DayRange:
    """The last days on which nothing is wanting: a day before the first short one."""
    found = (course.day_quantile(p) for p in (0.5, 0.1, 0.9))
    return DayRange(*(None if day is None else _day(today, max(day - 1, 0)) for day in found))


def _days(days: NDArray[np.int64], today: dt.date, last: int) -> DayRange:
    found = (int(np.quantile(days, p, method="inverted_cdf")) for p in (0.5, 0.1, 0.9))
    return DayRange(*(_day(today, day) if day <= last else None for day in found))


def cover_weeks(course: RunningOut) -> tuple[float | None, float | None, float | None]:
    weeks = [
        None if day is None else max(day - 1, 0) / 7.0 for day in (course.day_quantile(p) for p in (0.5, 0.1, 0.9))
    ]
    return weeks[0], weeks[1], weeks[2]


def _left_over(shelf: Shelf, due: int, paths: DemandPaths, today: dt.date) -> tuple[float, int, int] | None:
    """Pieces still there when a superseded part goes out of use, if no more are ordered."""
    if shelf.used_until is None or (shelf.used_until - today).days > paths.days:
        return None
    day = max((shelf.used_until - today).days, 0)
    left = np.maximum(shelf.on_hand + due - paths.cumulative[:, day], 0)
    counts = CountDistribution(np.bincount(left) / left.size)
    return counts.mean, *counts.interval(0.8)


def _day(today: dt.date, days: int) -> dt.date:
    return today + dt.timedelta(days=days)


def _plain(value: Any) -> Any:
    if isinstance(value, dt.date):
        return value.isoformat()
    if isinstance(value, Decimal):
        return str(value)
    if isinstance(value, dict):
        return {key: _plain(each) for key, each in value.items()}
    if isinstance(value, tuple | list):
        return [_plain(each) for each in value]
    return value
