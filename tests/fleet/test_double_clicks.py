"""What is sent twice at one moment, by a double click or by two people, is begun and recorded once, on both engines.

Each writer stops where a missing lock would let both through; with the lock the second comes only after the first.
"""

from __future__ import annotations

import uuid
from typing import Any

import pytest
from django.test import Client
from django.urls import reverse

from fleet.actions.count_stock import count_stock
from fleet.actions.entries import PartChange
from fleet.actions.errors import BadValue, ChangedCount, OrderedMeanwhile, RecordError
from fleet.actions.place_supply_order import OrderedPart, place_supply_order
from fleet.actions.plan_rollout import plan_rollout
from fleet.actions.record_visit import record_visit
from fleet.actions.remove_part import remove_part
from fleet.actions.say_looks_wrong import say_looks_wrong
from fleet.actions.settle_looks_wrong import settle_looks_wrong
from fleet.models import (
    Fitting,
    KeptFile,
    LooksWrong,
    Person,
    Redesign,
    RolloutStep,
    StockMove,
    SupplyLine,
    SupplyOrder,
    Work,
    WorkState,
)
from fleet.views import records
from reliability.views import backtest
from tests.factories import Carriage, at, make_depot, make_manager, make_planner, make_store, on, stock
from tests.fleet.invariants import broken_rules
from tests.fleet.invariants_stock import broken_stock_rules
from tests.fleet.together import Meeting, at_once, raised, recorded

pytestmark = pytest.mark.django_db(transaction=True)


@pytest.fixture
def weir() -> Carriage:
    return Carriage()


def met_before(monkeypatch: pytest.MonkeyPatch, owner: Any, name: str) -> Meeting:
    """Every writer waits for the other just before this function."""
    meeting, original = Meeting(), getattr(owner, name)

    def after_waiting(*args: Any, **kwargs: Any) -> Any:
        meeting.wait()
        return original(*args, **kwargs)

    monkeypatch.setattr(owner, name, after_waiting)
    return meeting


def posting(person: Any, address: str, **data: Any) -> Any:
    def post() -> int:
        client = Client()
        client.force_login(person)
        return client.post(address, data).status_code

    return post


def test_an_import_confirmed_twice_runs_once(monkeypatch: pytest.MonkeyPatch) -> None:
    mona = make_manager()
    preview = Work.objects.create(kind="preview_records", person=mona, state=WorkState.DONE, result={"plan": "p"})
    KeptFile.objects.create(work=preview, name="sites.csv", content=b"site\nA\n")
    meeting = met_before(monkeypatch, records, "enqueue")
    answers = at_once(*[posting(mona, f"/work/{preview.pk}/confirm/") for _ in range(2)])
    assert answers == [302, 302]
    assert not meeting.met
    assert Work.objects.filter(kind="import_records").count() == 1


def test_past_forecasts_asked_for_twice_are_judged_once(weir: Carriage, monkeypatch: pytest.MonkeyPatch) -> None:
    meeting = met_before(monkeypatch, backtest, "enqueue")
    address = f"{reverse('backtest')}?component={weir.nuts.code}"
    answers = at_once(*[posting(weir.manager, address, quarters="8") for _ in range(2)])
    assert answers == [302, 302]
    assert not meeting.met
    assert Work.objects.count() == 1


def test_a_doubt_said_twice_at_once_waits_once(weir: Carriage, monkeypatch: pytest.MonkeyPatch) -> None:
    from fleet.actions import say_looks_wrong as say_looks_wrong_file

    fitting = weir.fit()
    meeting = met_before(monkeypatch, say_looks_wrong_file, "add")
    answers = at_once(*[lambda: say_looks_wrong(by=weir.contact, record=fitting, word="twice") for _ in range(2)])
    assert len({doubt.pk for doubt in recorded(answers)}) == 1
    assert not meeting.met
    assert LooksWrong.objects.count() == 1


def test_a_doubt_is_settled_by_one_of_two(weir: Carriage) -> None:
    doubt = say_looks_wrong(by=weir.contact, record=weir.fit(), word="twice")
    answers = at_once(
        *[
            lambda outcome=outcome: settle_looks_wrong(by=weir.manager, doubt=doubt, outcome=outcome)
            for outcome in ("corrected", "confirmed")
        ]
    )
    assert len(recorded(answers)) == 1
    doubt.refresh_from_db()
    assert doubt.outcome == recorded(answers)[0].outcome


def test_a_part_is_withdrawn_while_another_takes_its_place(weir: Carriage) -> None:
    fitting = weir.fit()
    changes = [PartChange(position=weir.nut, reason="failed", part=weir.n2)]
    answers = at_once(
        lambda: remove_part(by=weir.crew, fitting=fitting, removed_on=on("2024-03-09"), reason="planned"),
        lambda: record_visit(by=weir.crew, module=weir.module, happened_at=at("2024-03-09"), changes=changes),
    )
    assert all(not isinstance(answer, Exception) or isinstance(answer, RecordError) for answer in answers)
    assert recorded(answers)
    assert Fitting.objects.running().count() <= 1
    assert broken_rules() == []


def test_two_count_one_shelf(weir: Carriage) -> None:
    """One count stands; who began before it is told that the book moved, and nothing is taken off twice."""
    shelf = make_store(code="DEPOT", site=make_depot())
    stock(shelf, weir.n1, 8)
    people = [make_planner(), make_planner()]
    answers = at_once(
        *[
            lambda person=person: count_stock(
                by=person, store=shelf, part=weir.n1, counted=7, expected=8, reason="one broken"
            )
            for person in people
        ]
    )
    assert len(recorded(answers)) == 1
    assert len(raised(answers, ChangedCount)) == 1
    assert StockMove.objects.filter(kind="count").count() == 1
    assert broken_stock_rules() == []


def test_one_order_number_is_placed_by_one_of_two(weir: Carriage) -> None:
    people = [make_planner(), make_planner()]
    answers = at_once(
        *[
            lambda person=person: place_supply_order(
                by=person, lines=[OrderedPart(weir.n1, 4)], code="PO-7", entry_key=uuid.uuid4()
            )
            for person in people
        ]
    )
    assert len(recorded(answers)) == 1
    assert "exists already" in raised(answers, BadValue)[0].message
    assert (SupplyOrder.objects.count(), SupplyLine.objects.count()) == (1, 1)


def test_a_part_is_ordered_by_one_of_two_planners(weir: Carriage, monkeypatch: pytest.MonkeyPatch) -> None:
    """Both saw the same list; the second is told, and may order besides when they send it again."""
    from fleet.actions import place_supply_order as place_supply_order_file

    ines, otto = make_planner(name="Ines"), make_planner(name="Otto")
    meeting = met_before(monkeypatch, place_supply_order_file, "add")

    def ordering(person: Person, newest: int) -> Any:
        lines = [OrderedPart(weir.n1, 20), OrderedPart(weir.n2, 5)]
        return lambda: place_supply_order(by=person, lines=lines, entry_key=uuid.uuid4(), newest=newest)

    answers = at_once(ordering(ines, 0), ordering(otto, 0))
    [told] = raised(answers, OrderedMeanwhile)
    assert len(recorded(answers)) == 1
    assert not meeting.met
    assert "since you opened this page" in told.message
    assert SupplyLine.objects.count() == 2
    ordering(otto, told.data["shown_now"]["newest"])()
    assert SupplyLine.objects.count() == 4


def test_a_module_is_planned_once_by_two(weir: Carriage) -> None:
    redesign = Redesign.objects.create(code="LIP")
    answers = at_once(
        *[
            lambda: plan_rollout(by=None, redesign=redesign, modules=[weir.module], first_on=on("2026-03-02"))
            for _ in range(2)
        ]
    )
    assert sorted(len(steps) for steps in recorded(answers)) == [0, 1]
    assert RolloutStep.objects.count() == 1


def test_a_forecast_is_kept_once_by_a_double_click(weir: Carriage) -> None:
    from reliability.forecasts.keep_forecast import keep_forecast
    from reliability.forecasts.question import question_of
    from reliability.models import KeptForecast

    key, question = uuid.uuid4(), question_of(weir.nuts)
    answers = at_once(
        *[
            lambda: keep_forecast(by=weir.manager, question=question, document={"total": 3}, entry_key=key)
            for _ in range(3)
        ]
    )
    assert len({kept.pk for kept in recorded(answers)}) == 1
    assert len(recorded(answers)) == 3
    assert KeptForecast.objects.count() == 1
