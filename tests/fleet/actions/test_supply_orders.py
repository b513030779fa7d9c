"""Supply orders: Ines orders, deliveries come in parts, what never comes is called off."""

from __future__ import annotations

import datetime as dt
import uuid
from collections.abc import Iterator
from decimal import Decimal
from typing import Any

import pytest

from fleet.actions.change_supply_line import cancel_supply_line, change_supply_line
from fleet.actions.errors import AlreadyDone, BadValue, ChangedSince, NotAllowed
from fleet.actions.place_supply_order import OrderedPart, place_supply_order
from fleet.actions.receive_stock import receive_delivery, receive_stock
from fleet.actions.strike_out import strike_out
from fleet.models import Person, StockMove, Store, SupplyLine, SupplyOrder
from fleet.stock import deliveries, due_of
from tests.factories import Carriage, make_depot, make_store, on
from tests.fleet.invariants_stock import broken_stock_rules


@pytest.fixture(autouse=True)
def sound_afterwards(db: None) -> Iterator[None]:
    yield
    assert broken_stock_rules() == []


pytestmark = pytest.mark.django_db


@pytest.fixture
def shelf() -> Store:
    return make_store(name="Depot shelf", site=make_depot())


@pytest.fixture
def line(weir: Carriage, ines: Person) -> SupplyLine:
    order = place_supply_order(
        by=ines, supplier="Brandt", ordered_on=on("2024-03-01"), code="PO-7",
        lines=[OrderedPart(weir.n1, 10, due_on=on("2024-03-20"), unit_cost=Decimal("12.50")), OrderedPart(weir.s1, 2)],
    )  # fmt: skip
    return order.lines.get(part=weir.n1)


def due(line: SupplyLine) -> int:
    return int(SupplyLine.objects.with_received().get(pk=line.pk).due)


def test_an_order_knows_what_its_parts_cost_and_when_they_are_due(weir: Carriage, ines: Person) -> None:
    weir.n1.lead_time_days, weir.n1.unit_cost = 21, Decimal("9.90")
    order = place_supply_order(by=ines, ordered_on=on("2024-03-01"), lines=[OrderedPart(weir.n1, 4)])
    line = order.lines.get()
    assert (line.due_on, line.unit_cost, order.entered_by) == (on("2024-03-22"), Decimal("9.90"), ines)
    assert order.code.startswith("SO-")


def test_several_deliveries_come_against_one_line(line: SupplyLine, ines: Person, shelf: Store) -> None:
    for day, quantity in (("2024-03-18", 4), ("2024-04-02", 6)):
        receive_stock(by=ines, store=shelf, line=line, quantity=quantity, happened_on=on(day))
    assert due(line) == 0
    told = deliveries(StockMove.objects.all())
    assert [(each.quantity, each.lead_time, each.late_by) for each in told] == [(4, 17, -2), (6, 32, 13)]


def test_no_more_comes_than_was_ordered(line: SupplyLine, ines: Person, shelf: Store) -> None:
    receive_stock(by=ines, store=shelf, line=line, quantity=8)
    with pytest.raises(BadValue, match=r"2.are still to come on order PO-7, and 3 were entered") as refusal:
        receive_stock(by=ines, store=shelf, line=line, quantity=3)
    assert refusal.value.data["due"] == 2
    receive_stock(by=ines, store=shelf, line=line, quantity=2)
    with pytest.raises(BadValue, match="none is still to come"):
        receive_stock(by=ines, store=shelf, line=line, quantity=1)


def test_nothing_comes_before_it_was_ordered(line: SupplyLine, ines: Person, shelf: Store) -> None:
    with pytest.raises(BadValue, match="before order PO-7 was placed"):
        receive_stock(by=ines, store=shelf, line=line, quantity=1, happened_on=on("2024-02-28"))


def test_one_delivery_of_several_parts_comes_whole_or_not(
    line: SupplyLine, weir: Carriage, ines: Person, shelf: Store
) -> None:
    other = line.order.lines.get(part=weir.s1)
    key = uuid.uuid4()
    with pytest.raises(BadValue) as refusal:
        receive_delivery(by=ines, store=shelf, quantities={line: 4, other: 3})
    assert refusal.value.data["line"] == other.pk
    assert not StockMove.objects.exists()
    for _ in range(2):
        moves = receive_delivery(by=ines, store=shelf, quantities={line: 4, other: 2}, entry_key=key)
    assert [move.quantity for move in moves] == [4, 2]
    assert StockMove.objects.count() == 2
    assert due_of(SupplyLine.objects.all()) == {weir.n1.pk: 6}


def test_a_line_is_changed_but_not_below_what_came(line: SupplyLine, ines: Person, shelf: Store) -> None:
    receive_stock(by=ines, store=shelf, line=line, quantity=4)
    with pytest.raises(BadValue, match=r"4 of .* came already"):
        change_supply_line(by=ines, line=line, version=1, quantity=3)
    changed = change_supply_line(by=ines, line=line, version=1, quantity=12, due_on=on("2024-05-01"), reason="later")
    assert (changed.quantity, changed.due_on, changed.version) == (12, on("2024-05-01"), 2)
    with pytest.raises(ChangedSince):
        change_supply_line(by=ines, line=line, version=1, quantity=20)
    assert changed.history.filter(history_change_reason="later").exists()


def test_what_never_comes_is_called_off(line: SupplyLine, weir: Carriage, ines: Person, shelf: Store) -> None:
    receive_stock(by=ines, store=shelf, line=line, quantity=4)
    cut = cancel_supply_line(by=ines, line=line, reason="supplier gave up")
    assert (cut.quantity, due(line), cut.struck_out) == (4, 0, "")
    with pytest.raises(AlreadyDone, match="Nothing is left to call off"):
        cancel_supply_line(by=ines, line=line, reason="again")
    gone = cancel_supply_line(by=ines, line=line.order.lines.get(part=weir.s1), reason="not needed")
    assert gone.struck_out == "not needed"
    with pytest.raises(BadValue, match="was taken off order PO-7"):
        receive_stock(by=ines, store=shelf, line=gone, quantity=1)


def test_a_receipt_struck_out_is_to_come_again(line: SupplyLine, ines: Person, shelf: Store) -> None:
    move = receive_stock(by=ines, store=shelf, line=line, quantity=4)
    strike_out(by=ines, record=move, reason="booked twice")
    assert due(line) == 10


def test_a_repeated_order_is_placed_once(weir: Carriage, ines: Person) -> None:
    key = uuid.uuid4()
    lines = [OrderedPart(weir.n1, 4)]
    orders = {place_supply_order(by=ines, lines=lines, entry_key=key).pk for _ in range(2)}
    assert len(orders) == 1
    assert SupplyOrder.objects.count() == 1


@pytest.mark.parametrize(
    ("fields", "words"),
    [
        ({"lines": []}, "holds no part yet"),
        ({"ordered_on": dt.date(2100, 1, 1)}, "lies in the future"),
        ({"code": "no code"}, "is no code"),
    ],
)
def test_a_wrong_order_is_refused(fields: dict[str, Any], words: str, weir: Carriage, ines: Person) -> None:
    with pytest.raises(BadValue, match=words):
        place_supply_order(by=ines, **{"lines": [OrderedPart(weir.n1, 4)], **fields})
    assert not SupplyOrder.objects.exists()


def test_the_line_at_fault_is_named(weir: Carriage, ines: Person) -> None:
    with pytest.raises(BadValue, match="stands twice") as refusal:
        place_supply_order(by=ines, lines=[OrderedPart(weir.n1, 4), OrderedPart(weir.n1, 2)])
    assert refusal.value.data["row"] == 1
    with pytest.raises(BadValue, match="out of range"):
        place_supply_order(by=ines, lines=[OrderedPart(weir.n1, 0)])


@pytest.mark.parametrize(("day", "words"), [("9999-12-31", "more than ten years ahead"), ("0001-01-01", "before 1900")])
def test_a_year_typed_wrong_is_no_day_of_a_delivery(
    weir: Carriage, ines: Person, line: SupplyLine, day: str, words: str
) -> None:
    with pytest.raises(BadValue, match=words):
        place_supply_order(by=ines, lines=[OrderedPart(weir.n2, 4, due_on=on(day))])
    with pytest.raises(BadValue, match=words):
        change_supply_line(by=ines, line=line, version=1, due_on=on(day))
    assert SupplyOrder.objects.count() == 1


def test_only_the_office_orders(weir: Carriage, rosa: Person) -> None:
    for person in (rosa, weir.contact):
        with pytest.raises(NotAllowed):
            place_supply_order(by=person, lines=[OrderedPart(weir.n1, 4)])
    assert not SupplyOrder.objects.for_person(rosa).exists()
