"""Two people at one store at one moment: the storekeepers Ines and Otto, and Rosa with her van.

As in test_concurrency.py, a meeting point stands where a missing lock would let both through.
"""

from __future__ import annotations

import uuid
from collections.abc import Iterator
from typing import Any

import pytest

from fleet.actions import count_stock as count_stock_file
from fleet.actions import ledger
from fleet.actions import receive_stock as receive_stock_file
from fleet.actions.book_hours import book_hours
from fleet.actions.count_stock import count_stock
from fleet.actions.entries import PartChange
from fleet.actions.errors import AlreadyDone, BadValue, ChangedCount, NotEnough, RecordError
from fleet.actions.finish_job import finish_job
from fleet.actions.issue_part import issue_part
from fleet.actions.log_visit import log_visit
from fleet.actions.place_module import place_module
from fleet.actions.place_supply_order import OrderedPart, place_supply_order
from fleet.actions.rebuild_balances import ledger_sums, wrong_balances
from fleet.actions.receive_stock import receive_delivery, receive_stock
from fleet.actions.take_in_module import take_in_module
from fleet.actions.transfer_stock import transfer_stock
from fleet.models import BenchHours, BenchJob, EntryKey, Person, StockBalance, StockMove, Store, SupplyLine, Visit
from tests.factories import Carriage, at, make_bench, make_depot, make_planner, make_store, on, stock
from tests.fleet.invariants import broken_rules
from tests.fleet.invariants_stock import broken_stock_rules
from tests.fleet.together import Meeting, at_once, raised, recorded

pytestmark = pytest.mark.django_db(transaction=True)


@pytest.fixture(autouse=True)
def sound_afterwards(request: pytest.FixtureRequest, transactional_db: None) -> Iterator[None]:
    yield
    if "without_the_lock" not in request.node.name:
        assert broken_stock_rules() == []


@pytest.fixture
def weir() -> Carriage:
    return Carriage()


@pytest.fixture
def shelf() -> Store:
    return make_store(code="DEPOT", site=make_depot())


@pytest.fixture
def keepers() -> tuple[Person, Person]:
    return make_planner(name="Ines"), make_planner(name="Otto")


def lies(store: Store, weir: Carriage) -> int:
    assert wrong_balances() == {}
    return ledger_sums().get((store.pk, weir.n1.pk, "new"), 0)


def issuing(person: Person, store: Store, weir: Carriage, **fields: Any) -> Any:
    return lambda: issue_part(by=person, store=store, part=weir.n1, reason="for the tank", **fields)


def test_two_people_issue_the_last_one(
    weir: Carriage, shelf: Store, keepers: tuple[Person, Person], monkeypatch: pytest.MonkeyPatch
) -> None:
    stock(shelf, weir.n1, 1)
    meeting = Meeting().after(monkeypatch, ledger, "locked_balances")
    answers = at_once(*[issuing(person, shelf, weir) for person in keepers])
    assert len(recorded(answers)) == 1
    assert "holds none of" in raised(answers, NotEnough)[0].message
    assert lies(shelf, weir) == 0
    assert not meeting.met


@pytest.mark.postgres
def test_without_the_lock_both_would_issue_it(
    weir: Carriage, shelf: Store, keepers: tuple[Person, Person], monkeypatch: pytest.MonkeyPatch
) -> None:
    """The proof that the test above can fail."""
    stock(shelf, weir.n1, 1)

    def unlocked(keys: Any) -> Any:
        return {key: StockBalance.objects.get(store=key[0], part=key[1], condition=key[2]) for key in keys}

    monkeypatch.setattr(ledger, "locked_balances", unlocked)
    meeting = Meeting().after(monkeypatch, ledger, "locked_balances")
    answers = at_once(*[issuing(person, shelf, weir) for person in keepers])
    assert meeting.met
    assert len(recorded(answers)) == 2
    assert ledger_sums()[shelf.pk, weir.n1.pk, "new"] == -1


def test_a_repeated_submit_issues_once(weir: Carriage, shelf: Store, keepers: tuple[Person, Person]) -> None:
    stock(shelf, weir.n1, 5)
    key = uuid.uuid4()
    answers = at_once(*[issuing(keepers[0], shelf, weir, entry_key=key) for _ in range(3)])
    assert len({move.pk for move in recorded(answers)}) == 1
    assert len(recorded(answers)) == 3
    assert lies(shelf, weir) == 4
    assert EntryKey.objects.count() == 1


def test_a_count_during_an_issue(
    weir: Carriage, shelf: Store, keepers: tuple[Person, Person], monkeypatch: pytest.MonkeyPatch
) -> None:
    """Either the issue comes first and the count is asked again, or the count stands and the issue follows it."""
    stock(shelf, weir.n1, 8)
    Meeting().after(monkeypatch, count_stock_file, "check_store")
    answers = at_once(
        issuing(keepers[0], shelf, weir),
        lambda: count_stock(by=keepers[1], store=shelf, part=weir.n1, counted=7, expected=8, reason="one broken"),
    )
    counted = answers[1]
    assert isinstance(answers[0], StockMove)
    if isinstance(counted, ChangedCount):
        assert (counted.data["expected"], counted.data["on_hand"], lies(shelf, weir)) == (8, 7, 7)
    else:
        assert (counted.quantity, lies(shelf, weir)) == (-1, 6)


def test_two_receive_the_same_line(
    weir: Carriage, shelf: Store, keepers: tuple[Person, Person], monkeypatch: pytest.MonkeyPatch
) -> None:
    line = place_supply_order(by=keepers[0], ordered_on=on("2024-03-01"), lines=[OrderedPart(weir.n1, 5)]).lines.get()
    meeting = Meeting().after(monkeypatch, receive_stock_file, "take_from_line")
    answers = at_once(*[lambda p=p: receive_stock(by=p, store=shelf, line=line, quantity=5) for p in keepers])
    assert len(recorded(answers)) == 1
    assert "none is still to come" in raised(answers, BadValue)[0].message
    assert lies(shelf, weir) == 5
    assert not meeting.met


def test_deliveries_and_transfers_crosswise_wait_in_turn(
    weir: Carriage, shelf: Store, keepers: tuple[Person, Person]
) -> None:
    other = make_store()
    for store in (shelf, other):
        for part in (weir.n1, weir.n2):
            stock(store, part, 50)
    orders = [
        place_supply_order(by=keepers[0], ordered_on=on("2024-03-01"), lines=[OrderedPart(a, 20), OrderedPart(b, 20)])
        for a, b in ((weir.n1, weir.n2), (weir.n2, weir.n1))
    ]

    def deliver(order: Any) -> int:
        for _ in range(5):
            receive_delivery(by=keepers[0], store=shelf, quantities=dict.fromkeys(order.lines.all(), 2))
        return 0

    def swap(a: Store, b: Store) -> int:
        for _ in range(6):
            for part in (weir.n1, weir.n2):
                transfer_stock(by=keepers[1], store=a, other_store=b, part=part, quantity=1)
        return 0

    answers = at_once(
        *[lambda order=order: deliver(order) for order in orders],
        lambda: swap(shelf, other),
        lambda: swap(other, shelf),
    )
    assert answers == [0, 0, 0, 0]
    assert (lies(shelf, weir), lies(other, weir)) == (70, 50)
    assert SupplyLine.objects.open().count() == 4


def test_one_log_sent_twice_at_once_takes_its_part_once(weir: Carriage) -> None:
    van = make_store(person=weir.crew)
    stock(van, weir.n2, 5)
    weir.fit()
    key = uuid.uuid4()
    entry = PartChange(position=weir.nut, reason="failed", part=weir.n2)
    answers = at_once(
        *[
            lambda: log_visit(
                by=weir.crew, module=weir.module, happened_at=at("2024-03-09"), changes=[entry], entry_key=key,
                issue_from=van,
            )
            for _ in range(3)
        ]
    )  # fmt: skip
    assert len(recorded(answers)) == 3
    assert (Visit.objects.count(), StockMove.objects.filter(kind="issue").count()) == (1, 1)
    assert wrong_balances() == {}


def test_a_module_is_taken_in_once_by_two(weir: Carriage, keepers: tuple[Person, Person]) -> None:
    depot = make_depot()
    answers = at_once(*[lambda p=p: take_in_module(by=p, module=weir.module, depot=depot) for p in keepers])
    assert len(recorded(answers)) == 1
    assert "was taken in already" in raised(answers, AlreadyDone)[0].message
    assert BenchJob.objects.count() == 1
    assert broken_rules() == []


def test_two_book_on_one_job_and_nothing_is_lost(weir: Carriage, keepers: tuple[Person, Person]) -> None:
    depot = make_depot()
    job = take_in_module(by=keepers[0], module=weir.module, depot=depot)
    greta = make_bench(depot)
    answers = at_once(*[lambda: book_hours(by=greta, job=job, hours=1.5) for _ in range(4)])
    assert len(recorded(answers)) == 4
    assert BenchHours.objects.get().hours == 6


def test_a_job_ends_or_its_module_leaves(weir: Carriage, keepers: tuple[Person, Person]) -> None:
    depot = make_depot()
    job = take_in_module(by=keepers[0], module=weir.module, depot=depot, received_on=on("2024-03-01"))
    answers = at_once(
        lambda: finish_job(by=keepers[0], job=job, outcome="ready", finished_on=on("2024-03-09")),
        lambda: place_module(by=keepers[1], module=weir.module, site=weir.site, from_on=on("2024-03-09")),
    )
    assert isinstance(answers[0], BenchJob)
    assert not isinstance(answers[1], Exception) or isinstance(answers[1], RecordError)
    assert broken_rules() == []
