"""What to order today, from plain values; and why, in words."""

from __future__ import annotations

import datetime as dt
import json
from dataclasses import replace
from decimal import Decimal

import numpy as np
import pytest

from reliability.forecasts.order_list import (
    DayRange,
    Due,
    OrderLine,
    OrderList,
    PastDelivery,
    Rules,
    Shelf,
    order_line,
    order_list,
)
from reliability.forecasts.supply_words import first_reason, list_sentence, reasons

TODAY = dt.date(2026, 3, 2)
RULES = Rules(TODAY)


def nuts(**fields) -> Shelf:
    return Shelf(**{"part": "N3", "name": "Drive nut", "on_hand": 38, "lead_time_days": 28, **fields})


def use(a_week: float, weeks: int = 26, spread: float = 0.05) -> np.ndarray:
    rng = np.random.default_rng(1)
    return rng.poisson(a_week * rng.gamma(1 / spread, spread, (2000, 1)), (2000, weeks))


def after(days: int) -> dt.date:
    return TODAY + dt.timedelta(days=days)


def plain(sentence: str) -> str:
    return sentence.replace("\u00a0", " ")


def test_the_level_covers_lead_time_and_review() -> None:
    line = order_line(nuts(), use(7.0), RULES)
    # a piece a day over about 28 + 14 days and their spread
    assert 42 < line.use_mean < 48
    assert line.use_bands["0.8"][0] < line.use_mean < line.use_bands["0.8"][1] < line.use_bands["0.95"][1]
    assert line.use_bands["0.95"][1] >= line.order_up_to > line.use_bands["0.5"][1]
    assert line.reorder_level < line.order_up_to
    assert line.quantity == line.wanting == line.order_up_to - 38
    assert line.span_days == pytest.approx(42, rel=0.01)
    assert line.comes.middle == after(29)  # 28.0-and-a-bit days, rounded up
    assert line.comes.first < line.comes.middle < line.comes.last


def test_the_promise_is_kept_by_a_shelf_followed_day_by_day() -> None:
    shelf = nuts(deliveries=tuple(PastDelivery(days) for days in (24, 31, 22, 29, 40, 26)))
    weekly = use(7.0, weeks=52)
    line = order_line(shelf, weekly, RULES)
    rng = np.random.default_rng(9)
    short = 0
    trials = 3000
    lead = np.array([24, 31, 22, 29, 40, 26, 28])
    for _ in range(trials):
        # lives of orders resampled with some spread of their own, use by day from another draw
        days = int(np.ceil(rng.choice(lead) * rng.lognormal(0, 0.12))) + 14
        wanted = weekly[rng.integers(2000)]
        short += wanted[: days // 7].sum() + rng.binomial(wanted[days // 7], days % 7 / 7) > line.order_up_to
    assert short / trials == pytest.approx(0.05, abs=0.025)


def test_what_is_due_counts_but_only_when_it_comes() -> None:
    soon = Due(30, after(-20), after(5))
    late = Due(30, after(-20), after(60))
    without, with_soon, with_late = (
        order_line(nuts(on_hand=10, due=due), use(7.0), RULES) for due in ((), (soon,), (late,))
    )
    assert with_soon.quantity == with_soon.order_up_to - 40 == with_late.quantity
    # an order open for twenty days says that lead times are rather longer
    assert 0 <= with_soon.order_up_to - without.order_up_to < 10
    assert with_soon.chance_if_nothing < with_late.chance_if_nothing
    assert with_soon.chance_before_delivery < 0.35 < with_late.chance_before_delivery
    assert with_soon.tell_on > with_late.tell_on
    assert with_soon.next_delivery.middle < after(12)
    assert with_late.next_delivery.middle > after(30)
    assert abs(without.next_delivery.first - without.comes.first) <= dt.timedelta(days=2)


def test_promises_that_were_broken_are_believed_less() -> None:
    due = (Due(30, after(-20), after(10)),)
    kept = tuple(PastDelivery(28, promised_days=28) for _ in range(6))
    broken = tuple(PastDelivery(45, promised_days=30) for _ in range(6))
    trusted, doubted = (order_line(nuts(due=due, deliveries=past), use(7.0), RULES) for past in (kept, broken))
    assert after(9) <= trusted.next_delivery.middle <= after(12)
    assert doubted.next_delivery.middle > after(18)
    unknown = order_line(nuts(due=due), use(7.0), RULES).next_delivery
    assert trusted.next_delivery.last < unknown.last


def test_an_overdue_order_still_comes_later_than_today() -> None:
    line = order_line(nuts(due=(Due(30, after(-200), after(-170)),)), use(7.0), RULES)
    assert line.next_delivery.first > TODAY
    # it also teaches that orders can take long
    assert line.comes.last > order_line(nuts(), use(7.0), RULES).comes.last


def test_pack_minimum_and_money() -> None:
    line = order_line(nuts(on_hand=50, pack=25, minimum=60, unit_cost=Decimal("14.50")), use(7.0), RULES)
    assert 0 < line.wanting < 50
    assert line.quantity == 75
    assert line.added == 75 - line.wanting
    assert line.cost == Decimal("1087.50")
    enough = order_line(nuts(on_hand=500, pack=25, minimum=60, unit_cost=Decimal("14.50")), use(7.0), RULES)
    assert (enough.quantity, enough.cost) == (0, Decimal(0))
    assert enough.tell_on is None or enough.tell_on > after(300)


def test_a_higher_promise_a_longer_review_and_less_knowledge_all_want_more() -> None:
    base = order_line(nuts(), use(7.0), RULES).order_up_to
    assert order_line(nuts(), use(7.0), replace(RULES, service_level=0.99)).order_up_to > base
    assert order_line(nuts(), use(7.0), replace(RULES, review_days=28)).order_up_to > base
    assert order_line(nuts(), use(7.0, spread=0.3), RULES).order_up_to > base
    known = tuple(PastDelivery(28) for _ in range(40))
    assert order_line(nuts(deliveries=known), use(7.0), RULES).order_up_to < base


def test_the_day_of_danger_against_counting_futures() -> None:
    weekly = use(7.0)
    line = order_line(nuts(), weekly, RULES)
    # after whole weeks the shares of futures are known without any days
    weeks = np.cumsum(weekly, axis=1)
    over = next(week for week in range(26) if (weeks[:, week] > 38).mean() > 0.05)
    assert after(7 * over) < line.tell_on <= after(7 * (over + 1))
    middle = next(week for week in range(26) if (weeks[:, week] > 38).mean() >= 0.5)
    assert after(7 * middle - 1) <= line.lasts.middle <= after(7 * (middle + 1))
    assert line.lasts.first < line.lasts.middle < line.lasts.last
    assert line.cover_weeks[1] < line.cover_weeks[0] < line.cover_weeks[2]


def test_use_that_ends_with_the_rollout_leaves_stock_over() -> None:
    ending = use(7.0)
    ending[:, 4:] = 0
    shelf = nuts(superseded_by="N4", used_until=after(28), on_hand=40)
    line = order_line(shelf, ending, RULES)
    mean, low, high = line.left_over
    assert mean == pytest.approx(12, abs=2.5)
    assert low < mean < high
    assert line.quantity == max(0, line.order_up_to - 40)
    assert line.use_mean < 29


def test_unknown_use_orders_nothing_and_says_so() -> None:
    line = order_line(nuts(), None, RULES)
    assert not line.known
    assert line.quantity == 0
    assert reasons(line, TODAY) == [
        "38 on hand. No life of this part is on record, so its use cannot be forecast: we cannot tell what to order."
    ]


def test_a_short_forecast_is_carried_on_and_that_is_said() -> None:
    short = order_line(nuts(), use(7.0, weeks=4), RULES)
    whole = order_line(nuts(), use(7.0, weeks=52), RULES)
    assert short.carried_on > 0.8
    assert whole.carried_on < 0.02
    assert short.order_up_to == pytest.approx(whole.order_up_to, abs=8)
    assert any("carried on beyond the forecast" in sentence for sentence in reasons(short, TODAY))
    assert not any("carried on" in sentence for sentence in reasons(whole, TODAY))


def test_the_list_puts_first_what_runs_out_first_and_adds_up() -> None:
    shelves = [
        nuts(part="A", on_hand=900, unit_cost=Decimal(2)),
        nuts(part="B", on_hand=20, unit_cost=Decimal(2)),
        nuts(part="C", on_hand=0, unit_cost=Decimal(3)),
        nuts(part="D", on_hand=30),
        nuts(part="E", on_hand=1),
    ]
    found = order_list(shelves, dict.fromkeys("ABCD", use(7.0)), RULES)
    assert [line.part for line in found.lines][:3] == ["C", "B", "D"]
    by_part = {line.part: line for line in found.lines}
    assert found.cost == 2 * by_part["B"].quantity + 3 * by_part["C"].quantity
    assert found.without_price == ("D",)
    assert "without D, which has no price" in list_sentence(found, "EUR")
    assert not by_part["E"].known
    document = json.loads(json.dumps(found.document()))
    assert document["cost"] == str(found.cost)
    assert document["lines"][0]["part"] == "C"
    assert document["lines"][0]["tell_on"] == found.lines[0].tell_on.isoformat()
    again = order_list(shelves, dict.fromkeys("ABCD", use(7.0)), RULES)
    assert again.document() == found.document()


def test_nothing_to_order_at_all() -> None:
    assert list_sentence(OrderList((), Decimal(0), ()), "EUR") == "Nothing needs to be ordered today."
    found = order_list([nuts(on_hand=0)], {"N3": np.zeros((100, 13), dtype=int)}, RULES)
    assert found.lines[0].quantity == 0
    assert plain(reasons(found.lines[0], TODAY)[0]).startswith("0 on hand, and none is expected to be used;")


# words


def told(**fields) -> OrderLine:
    values = {
        "part": "N3", "name": "Drive nut", "known": True, "on_hand": 38, "due": 0, "supplier": "", "superseded_by": "",
        "looked_until": dt.date(2026, 12, 1), "use_mean": 46.2, "use_bands": {"0.8": (34, 59)}, "span_days": 75.4,
        "order_up_to": 63, "reorder_level": 52, "quantity": 30, "wanting": 25, "added": 5, "pack": 10, "minimum": 0,
        "chance_if_nothing": 0.71, "tell_on": dt.date(2026, 3, 27), "lead_orders": 12.0, "lead_figure": 60.0,
        "lasts": DayRange(dt.date(2026, 4, 12), dt.date(2026, 3, 30), dt.date(2026, 4, 29)),
        "comes": DayRange(dt.date(2026, 5, 2), dt.date(2026, 4, 20), dt.date(2026, 5, 21)),
    }  # fmt: skip
    return OrderLine(**{**values, **fields})


def test_the_usual_reasons() -> None:
    assert [plain(sentence) for sentence in reasons(told(), TODAY)] == [
        "38 on hand last to about 12 April (80 of 100 cases: 30 Mar to 29 Apr); an order placed today comes about "
        "2 May (20 Apr to 21 May).",
        "Until an order placed at the next review could come, in about 75 days, about 46 will be used "
        "(80 of 100 cases: 34 to 59).",
        "63 on hand or due are enough in 95 of 100 cases, so 25 are wanting. Packs of 10 make it 30. "
        "This cannot wait for the next review.",
        "If nothing is ordered, the chance of running out by then is 71 %; it passes 5 % on 27 March.",
    ]


def test_words_for_what_is_due_what_has_run_out_and_what_lasts() -> None:
    due = told(
        due=20, next_delivery=DayRange(dt.date(2026, 3, 9), dt.date(2026, 3, 5), None), chance_before_delivery=0.0
    )
    assert "38 on hand and 20 due last to about 12 April" in plain(first_reason(due, TODAY))
    assert (
        "The next delivery comes about 9 March (80 of 100 cases: from 5 Mar on); the chance of running out before it "
        "is under 1 %."
    ) in plain(reasons(due, TODAY)[3])
    gone = told(on_hand=-2, tell_on=TODAY, chance_if_nothing=1.0)
    assert plain(first_reason(gone, TODAY)).startswith("2 are owed already; an order placed today comes about 2 May")
    assert "It has run out." in reasons(gone, TODAY)
    empty = told(on_hand=0)
    assert plain(first_reason(empty, TODAY)).startswith(
        "None on hand and none due: the first is wanted about 12 April;"
    )
    calm = told(
        quantity=0, wanting=0, added=0, tell_on=None, chance_if_nothing=0.0,
        lasts=DayRange(None, dt.date(2027, 2, 1), None), looked_until=dt.date(2027, 6, 1),
    )  # fmt: skip
    sentences = [plain(sentence) for sentence in reasons(calm, TODAY)]
    assert sentences[0].startswith(
        "38 on hand last beyond 1 June 2027, as far as we look (in one case of ten only to 1 February 2027);"
    )
    assert sentences[2] == "63 on hand or due are enough in 95 of 100 cases; nothing needs to be ordered."
    assert sentences[3] == (
        "If nothing is ordered, the chance of running out by then is under 1 %; it stays under 5 % up to 1 June 2027."
    )


def test_words_for_lead_times_known_badly_and_parts_replaced() -> None:
    assert any("30 days are assumed" in each for each in reasons(told(lead_orders=0.0, lead_figure=None), TODAY))
    assert any("taken from the catalogue, 60" in each for each in reasons(told(lead_orders=0.0), TODAY))
    assert "The lead time rests on 3 past orders and the catalogue's 60 days." in [
        plain(each) for each in reasons(told(lead_orders=3.0), TODAY)
    ]
    over = [plain(each) for each in reasons(told(superseded_by="N4", left_over=(12.3, 6, 19)), TODAY)]
    assert any("about 12 will be left over by then (80 of 100 cases: 6 to 19)" in each for each in over)
    assert any("use up what is there" in each for each in reasons(told(superseded_by="N4"), TODAY))
    idle = reasons(told(superseded_by="N4", use_mean=0.0, quantity=0, order_up_to=0), TODAY)
    assert "N4 replaces this part and no position takes it any more: use what is there elsewhere, or scrap it." in idle
    assert any("used up by then" in each for each in reasons(told(superseded_by="N4", left_over=(0.0, 0, 0)), TODAY))
