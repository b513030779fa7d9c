"""The ledger: Ines keeps the store at the depot, Rosa has a van, the contact sees none of it."""

from __future__ import annotations

import datetime as dt
import io
import uuid
from collections.abc import Iterator
from typing import Any

import pytest
from django.core.management import CommandError, call_command
from django.utils import timezone

from fleet.actions.count_stock import count_stock
from fleet.actions.errors import AlreadyDone, BadValue, ChangedCount, NotAllowed, NotEnough, RecordError
from fleet.actions.issue_part import issue_part
from fleet.actions.rebuild_balances import ledger_sums, rebuild_balances, wrong_balances
from fleet.actions.receive_stock import receive_stock
from fleet.actions.record_visit import record_visit
from fleet.actions.save_store import save_store
from fleet.actions.scrap_stock import scrap_stock
from fleet.actions.strike_out import strike_out
from fleet.actions.transfer_stock import transfer_stock
from fleet.models import Person, StockBalance, StockMove, Store
from fleet.stock import on_hand
from tests.factories import Carriage, at, make_depot, make_store, on, stock
from tests.fleet.invariants_stock import broken_stock_rules


@pytest.fixture(autouse=True)
def sound_afterwards(db: None) -> Iterator[None]:
    yield
    assert broken_stock_rules() == []


pytestmark = pytest.mark.django_db


@pytest.fixture
def shelf() -> Store:
    return make_store(code="DEPOT", name="Depot shelf", site=make_depot())


@pytest.fixture
def van(rosa: Person) -> Store:
    return make_store(code="VAN-R", person=rosa)


def lies(store: Store, weir: Carriage) -> int:
    """From the ledger itself; the balance beside it must say the same."""
    found = ledger_sums().get((store.pk, weir.n1.pk, "new"), 0)
    assert on_hand(store, weir.n1).get("new", 0) == found
    return found


def test_on_hand_is_the_sum_of_the_moves(weir: Carriage, ines: Person, shelf: Store, van: Store) -> None:
    common: dict[str, Any] = {"by": ines, "part": weir.n1}
    receive_stock(store=shelf, quantity=10, happened_on=on("2024-03-01"), **common)
    transfer_stock(store=shelf, other_store=van, quantity=3, happened_on=on("2024-03-02"), **common)
    issue_part(store=shelf, quantity=2, reason="for the trial tank", **common)
    scrap_stock(store=shelf, quantity=1, reason="dropped", **common)
    count_stock(store=shelf, counted=5, reason="one found behind the rack", **common)
    assert (lies(shelf, weir), lies(van, weir)) == (5, 3)
    signed = list(StockMove.objects.order_by("id").values_list("kind", "quantity"))
    assert signed == [("receipt", 10), ("transfer", -3), ("issue", -2), ("scrap", -1), ("count", 1)]
    assert StockMove.history.count() == 5


def test_a_store_does_not_go_below_zero(weir: Carriage, ines: Person, shelf: Store) -> None:
    stock(shelf, weir.n1, 2)
    with pytest.raises(NotEnough) as refusal:
        issue_part(by=ines, store=shelf, part=weir.n1, quantity=3, reason="for the tank")
    assert refusal.value.message == (
        f"Depot shelf holds 2 of {weir.n1.code} on record, and 3 should leave it. "
        "Take fewer, choose another store, or count the shelf."
    )
    assert lies(shelf, weir) == 2
    assert StockMove.objects.count() == 1


def test_unless_it_may_and_then_it_shows(weir: Carriage, ines: Person, shelf: Store) -> None:
    save_store(by=ines, store=shelf, version=1, may_go_below_zero=True)
    issue_part(by=ines, store=Store.objects.get(pk=shelf.pk), part=weir.n1, quantity=3, reason="for the tank")
    assert lies(shelf, weir) == -3
    with pytest.raises(BadValue, match="lies below zero at Depot shelf"):
        save_store(by=ines, store=shelf, version=2, may_go_below_zero=False)


def test_used_parts_lie_apart_from_new_ones(weir: Carriage, ines: Person, shelf: Store) -> None:
    stock(shelf, weir.n1, 4)
    stock(shelf, weir.n1, 1, condition="used")
    with pytest.raises(NotEnough, match="holds 1 of used"):
        issue_part(by=ines, store=shelf, part=weir.n1, quantity=2, condition="used", reason="for the tank")
    issue_part(by=ines, store=shelf, part=weir.n1, condition="used", reason="for the tank")
    assert on_hand(shelf, weir.n1) == {"new": 4, "used": 0}


def test_a_crew_issues_from_its_own_van_to_a_visit_only(
    weir: Carriage, ines: Person, rosa: Person, van: Store, shelf: Store
) -> None:
    stock(van, weir.n1, 2)
    stock(shelf, weir.n1, 2)
    visit = record_visit(by=rosa, module=weir.module, happened_at=at("2024-03-09"))
    move = issue_part(by=rosa, store=van, part=weir.n1, visit=visit)
    assert (move.happened_on, move.visit, move.entered_by) == (on("2024-03-09"), visit, rosa)
    with pytest.raises(NotAllowed, match="to a visit, from your own store"):
        issue_part(by=rosa, store=van, part=weir.n1, reason="just so")
    with pytest.raises(NotAllowed, match="none of yours"):
        issue_part(by=rosa, store=shelf, part=weir.n1, visit=visit)
    assert lies(van, weir) == 1


@pytest.mark.parametrize("verb", [receive_stock, transfer_stock, scrap_stock, count_stock])
def test_only_the_office_keeps_the_stores(verb: Any, weir: Carriage, rosa: Person, van: Store, shelf: Store) -> None:
    fields: dict[str, Any] = {"store": van, "part": weir.n1}
    fields |= {"counted": 1} if verb is count_stock else {"quantity": 1}
    fields |= {"other_store": shelf} if verb is transfer_stock else {}
    fields |= {"reason": "x"} if verb is not receive_stock else {}
    for person in (rosa, weir.contact):
        with pytest.raises(NotAllowed):
            verb(by=person, **fields)


def test_an_issue_says_what_for(weir: Carriage, ines: Person, shelf: Store) -> None:
    stock(shelf, weir.n1, 2)
    with pytest.raises(BadValue, match="Name one, or say in a few words what for") as refusal:
        issue_part(by=ines, store=shelf, part=weir.n1)
    assert refusal.value.field == "reason"


@pytest.mark.parametrize("quantity", [0, -1, 1.5, "2", 10**9, True])
def test_a_wrong_number_is_refused(quantity: Any, weir: Carriage, ines: Person, shelf: Store) -> None:
    with pytest.raises(BadValue) as refusal:
        receive_stock(by=ines, store=shelf, part=weir.n1, quantity=quantity)
    assert refusal.value.field == "quantity"
    assert not StockMove.objects.exists()


def test_nothing_is_received_tomorrow(weir: Carriage, ines: Person, shelf: Store) -> None:
    with pytest.raises(BadValue, match="lies in the future"):
        receive_stock(
            by=ines, store=shelf, part=weir.n1, quantity=1, happened_on=(timezone.now() + dt.timedelta(days=3)).date()
        )


def test_a_count_that_agrees_is_kept_and_one_that_differs_needs_a_reason(
    weir: Carriage, ines: Person, shelf: Store
) -> None:
    stock(shelf, weir.n1, 4)
    agreed = count_stock(by=ines, store=shelf, part=weir.n1, counted=4)
    assert agreed.quantity == 0
    assert StockBalance.objects.get(store=shelf, part=weir.n1).counted_on == agreed.happened_on
    with pytest.raises(BadValue, match="Say in a few words"):
        count_stock(by=ines, store=shelf, part=weir.n1, counted=3)
    with pytest.raises(BadValue, match="Less than nothing"):
        count_stock(by=ines, store=shelf, part=weir.n1, counted=-1, reason="?")


def test_a_count_during_an_issue_is_made_again(weir: Carriage, ines: Person, shelf: Store) -> None:
    stock(shelf, weir.n1, 4)
    issue_part(by=ines, store=shelf, part=weir.n1, reason="for the tank")
    with pytest.raises(ChangedCount, match=r"4 of .* were on record; now 3 are"):
        count_stock(by=ines, store=shelf, part=weir.n1, counted=4, expected=4)
    assert lies(shelf, weir) == 3


def test_the_same_key_moves_once(weir: Carriage, ines: Person, shelf: Store) -> None:
    key = uuid.uuid4()
    moves = {receive_stock(by=ines, store=shelf, part=weir.n1, quantity=2, entry_key=key).pk for _ in range(3)}
    assert len(moves) == 1
    assert lies(shelf, weir) == 2
    with pytest.raises(BadValue, match="used for another entry"):
        receive_stock(by=ines, store=shelf, part=weir.n1, quantity=3, entry_key=key)


def test_a_move_struck_out_gives_back_what_it_took(weir: Carriage, ines: Person, shelf: Store, van: Store) -> None:
    receipt = stock(shelf, weir.n1, 5)
    move = transfer_stock(by=ines, store=shelf, other_store=van, part=weir.n1, quantity=4)
    with pytest.raises(NotEnough):
        strike_out(by=ines, record=receipt, reason="never came")
    strike_out(by=ines, record=move, reason="other van")
    assert (lies(shelf, weir), lies(van, weir)) == (5, 0)
    with pytest.raises(AlreadyDone):
        strike_out(by=ines, record=move, reason="again")
    strike_out(by=ines, record=receipt, reason="never came")
    assert lies(shelf, weir) == 0
    assert StockMove.history.filter(history_change_reason="never came").count() == 1


def test_a_crew_strikes_out_its_own_issue_of_the_day(weir: Carriage, rosa: Person, van: Store, tom: Person) -> None:
    stock(van, weir.n1, 1)
    visit = record_visit(by=rosa, module=weir.module, happened_at=at("2024-03-09"))
    move = issue_part(by=rosa, store=van, part=weir.n1, visit=visit)
    with pytest.raises(NotAllowed):
        strike_out(by=tom, record=move, reason="not mine")
    strike_out(by=rosa, record=move, reason="put back")
    assert lies(van, weir) == 1


def test_a_struck_out_visit_gives_its_parts_back(weir: Carriage, rosa: Person, van: Store) -> None:
    stock(van, weir.n1, 1)
    visit = record_visit(by=rosa, module=weir.module, happened_at=at("2024-03-09"))
    issue_part(by=rosa, store=van, part=weir.n1, visit=visit)
    with pytest.raises(BadValue, match=r"1.part issued"):
        strike_out(by=rosa, record=visit, reason="wrong module")
    strike_out(by=rosa, record=visit, reason="wrong module", with_all=True)
    assert lies(van, weir) == 1
    with pytest.raises(AlreadyDone):
        issue_part(by=rosa, store=van, part=weir.n1, visit=visit)


def test_balances_are_made_again_from_the_ledger(weir: Carriage, shelf: Store, van: Store) -> None:
    stock(shelf, weir.n1, 5)
    StockBalance.objects.filter(store=shelf).update(on_hand=7)
    StockBalance.objects.create(store=van, part=weir.n1, on_hand=1)
    key, other = (shelf.pk, weir.n1.pk, "new"), (van.pk, weir.n1.pk, "new")
    assert wrong_balances() == {key: (7, 5), other: (1, 0)}
    assert rebuild_balances() == {key: (7, 5), other: (1, 0)}
    assert wrong_balances() == {}
    assert lies(shelf, weir) == 5


def test_the_command_tells_and_repairs(weir: Carriage, shelf: Store) -> None:
    stock(shelf, weir.n1, 5)
    out = io.StringIO()
    call_command("check_stock", stdout=out)
    assert "Every balance is what the moves add up to." in out.getvalue()
    StockBalance.objects.filter(store=shelf).update(on_hand=7)
    with pytest.raises(CommandError, match="1 balances differ"):
        call_command("check_stock", "--json", stdout=out)
    call_command("check_stock", "--repair", stdout=out)
    assert f"DEPOT  {weir.n1.code} (new): 7 shown, 5 by the moves" in out.getvalue()
    assert lies(shelf, weir) == 5


def test_a_transfer_has_two_ends(weir: Carriage, ines: Person, shelf: Store) -> None:
    with pytest.raises(RecordError, match="both ends"):
        transfer_stock(by=ines, store=shelf, other_store=shelf, part=weir.n1, quantity=1)
