"""Why to order, in the sentences a planner reads."""

from __future__ import annotations

import datetime as dt
from collections.abc import Sequence
from decimal import Decimal

from fleet.formats import counted, long_day, number, percent, short_day
from reliability.forecasts.order_list import DayRange, OrderLine, OrderList

ASSUMED = "No lead time is known for this part: 30 days are assumed, and it may be a third or three times that."


def reasons(line: OrderLine, today: dt.date) -> list[str]:
    """Sentences in the order in which one would say them; the first stands in the list, the rest behind it."""
    if not line.known:
        unknown = "No life of this part is on record, so its use cannot be forecast: we cannot tell what to order."
        least = f"{at_least(line)}{wanting(line)}" if line.keep_at_least else ""
        return [sentence for sentence in (f"{have(line)}. {unknown}", least) if sentence]
    told = [first_reason(line, today), use(line), wanted(line), danger(line, today)]
    told += [superseded(line, today), lead(line), carried_on(line)]
    return [sentence for sentence in told if sentence]


def first_reason(line: OrderLine, today: dt.date) -> str:
    """`38 on hand last to about 12 April; an order placed today comes about 2 May.`"""
    comes = f"an order placed today comes about {day(line.comes.middle, today)}{between(line.comes, today, '')}"
    if line.on_hand < 0:
        return f"{number(-line.on_hand)} are owed already; {comes}."
    if line.use_mean == 0:
        return f"{have(line)}, and none is expected to be used; {comes}."
    if line.lasts.middle is None:
        early = "" if line.lasts.first is None else f" (in one case of ten only to {day(line.lasts.first, today)})"
        verb = "lasts" if line.on_hand + line.due == 1 else "last"
        return f"{have(line)} {verb} beyond {day(line.looked_until, today)}, as far as we look{early}; {comes}."
    verb = "lasts" if line.on_hand + line.due == 1 else "last"
    until = f"{verb} to about {day(line.lasts.middle, today)}{between(line.lasts, today)}"
    if line.on_hand + line.due == 0:
        return f"None on hand and none due: the first is wanted about {day(line.lasts.middle, today)}; {comes}."
    return f"{have(line)} {until}; {comes}."


def have(line: OrderLine) -> str:
    """38 on hand, 38 on hand and 20 due."""
    if line.due:
        return f"{number(line.on_hand)} on hand and {number(line.due)} due"
    return f"{number(line.on_hand)} on hand"


def use(line: OrderLine) -> str:
    if line.use_mean == 0:
        return ""
    low, high = line.use_bands["0.8"]
    if line.none_failed:
        return (
            f"None has failed so far; until an order placed at the next review could come, in about "
            f"{number(line.span_days, 0)} days, {spread_of(low, high)} will be used in 80 of 100 cases."
        )
    about = number(line.use_mean, 0 if line.use_mean >= 20 else 1)
    spread = spread_of(low, high)
    return (
        f"Until an order placed at the next review could come, in about {number(line.span_days, 0)} days, about "
        f"{about} will be used (80 of 100 cases: {spread})."
    )


def spread_of(low: int, high: int) -> str:
    return f"{number(low)} to {number(high)}" if low != high else number(low)


def wanted(line: OrderLine) -> str:
    """What is enough, what is wanting, and what pack and smallest order add."""
    if line.order_up_to == 0:
        return "Nothing needs to be ordered."
    verb = "is" if line.order_up_to == 1 else "are"
    enough = f"{number(line.order_up_to)} on hand or due {verb} enough in {chance_in_words(line.service_level)}"
    if line.keep_at_least and line.order_up_to == line.keep_at_least:
        enough = at_least(line)
    if not line.quantity:
        return f"{enough}; nothing needs to be ordered."
    told = f"{enough}{wanting(line)}"
    urgent = line.on_hand + line.due <= line.reorder_level
    return told + (" This cannot wait for the next review." if urgent else "")


def at_least(line: OrderLine) -> str:
    return f"The book keeps at least {number(line.keep_at_least)} on the shelf or on the way"


def wanting(line: OrderLine) -> str:
    """`, so 12 are wanting. Packs of 5 make it 15.`"""
    if not line.wanting:
        return "; nothing needs to be ordered."
    told = f", so {number(line.wanting)} {'is' if line.wanting == 1 else 'are'} wanting."
    if line.added:
        why = []
        if line.minimum > line.wanting:
            why.append(f"the smallest order of {number(line.minimum)}")
        if line.pack > 1:
            why.append(f"packs of {number(line.pack)}")
        told += f" {' and '.join(why).capitalize()} make it {number(line.quantity)}."
    return told


def danger(line: OrderLine, today: dt.date) -> str:
    """What happens if nothing is ordered."""
    if line.use_mean == 0:
        return ""
    if line.tell_on is not None and line.tell_on <= today:
        told = "It has run out."
    else:
        told = f"If nothing is ordered, the chance of running out by then is {simulated(line.chance_if_nothing)}"
    if line.tell_on is None:
        told += f"; it stays under 5 % up to {day(line.looked_until, today)}."
    elif line.tell_on > today:
        told += f"; it passes 5 % on {day(line.tell_on, today)}."
    if line.due and line.next_delivery.middle is not None:
        told += (
            f" The next delivery comes about {day(line.next_delivery.middle, today)}"
            f"{between(line.next_delivery, today)}; the chance of running out before it is "
            f"{simulated(line.chance_before_delivery)}."
        )
    return told


def superseded(line: OrderLine, today: dt.date) -> str:
    if not line.superseded_by:
        return ""
    told = f"{line.superseded_by} replaces this part"
    if line.used_until is not None:
        told += f" everywhere by {day(line.used_until, today)}"
    if line.use_mean == 0:
        return f"{told} and no position takes it any more: use what is there elsewhere, or scrap it."
    if line.left_over is None:
        return f"{told}: use up what is there before ordering more."
    mean, low, high = line.left_over
    if high == 0:
        return f"{told}; what is there will be used up by then."
    return (
        f"{told}; about {number(mean, 0)} will be left over by then (80 of 100 cases: {number(low)} to {number(high)}) "
        "to be used up elsewhere or scrapped."
    )


def lead(line: OrderLine) -> str:
    """What the lead time rests on, where that is little."""
    if line.lead_figure is None and line.lead_orders < 1:
        return ASSUMED
    if line.lead_orders < 1:
        return f"No order of this part has come yet: its lead time is taken from the catalogue, {_figure(line)}."
    if line.lead_orders < 4:
        rests = counted(round(line.lead_orders), "past order")
        also = "" if line.lead_figure is None else f" and the catalogue's {_figure(line)}"
        return f"The lead time rests on {rests}{also}."
    return ""


def carried_on(line: OrderLine) -> str:
    if line.carried_on < 0.05 or line.use_mean == 0:
        return ""
    return (
        f"In {percent(line.carried_on)} of cases the order comes so late that use had to be carried on beyond the "
        "forecast, at its last pace."
    )


def list_sentence(found: OrderList, currency: str) -> str:
    """How many parts to order, and what it costs."""
    wanted_lines = [line for line in found.lines if line.quantity]
    return order_sentence(len(wanted_lines), found.cost, found.without_price, currency)


def order_sentence(parts: int, cost: Decimal, without_price: Sequence[str], currency: str) -> str:
    """`3 parts to order today for 3 250 EUR.`"""
    if not parts:
        return "Nothing needs to be ordered today."
    told = f"{counted(parts, 'part')} to order today for {number(cost)} {currency}"
    if without_price:
        verb = "has" if len(without_price) == 1 else "have"
        told += f", without {', '.join(without_price)}, which {verb} no price"
    return told + "."


def simulated(chance: float) -> str:
    """A share of some thousand futures: none of them is not never, all of them is not for certain."""
    return percent(min(max(chance, 1e-9), 1.0 - 1e-9))


def chance_in_words(level: float) -> str:
    """0.95 as `95 of 100 cases`, 0.995 as `995 of 1 000 cases`."""
    hundred = level * 100
    if abs(hundred - round(hundred)) < 1e-9:
        return f"{number(round(hundred))} of 100 cases"
    return f"{number(round(level * 1000))} of {number(1000)} cases"


def between(days: DayRange, today: dt.date, cases: str = "80 of 100 cases: ") -> str:
    """` (80 of 100 cases: 28 Mar to 3 May)`; what it holds for is said once in a sentence."""
    if days.first is None:
        return ""
    if days.last is None:
        return f" ({cases}from {short(days.first, today)} on)"
    if days.first == days.last:
        return ""
    return f" ({cases}{short(days.first, today)} to {short(days.last, today)})"


def day(value: dt.date | None, today: dt.date) -> str:
    """12 April within this year or the next few months, else with its year."""
    if value is None:
        return "later than we look"
    text = long_day(value)
    near = value.year == today.year or (value - today).days < 183
    return text.rsplit(" ", 1)[0] if near else text


def short(value: dt.date, today: dt.date) -> str:
    near = value.year == today.year or (value - today).days < 183
    return short_day(value, value.year if near else None)


def _figure(line: OrderLine) -> str:
    return counted(round(line.lead_figure or 0), "day")
