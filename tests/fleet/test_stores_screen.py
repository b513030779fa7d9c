"""Stores and supply orders on screen: Otto keeps them, Rosa has a van, Pilar is a contact."""

from __future__ import annotations

import csv
import io
import uuid
from typing import Any

import pytest
from django.test import Client
from django.urls import reverse

from fleet.actions.errors import NotAllowed
from fleet.actions.issue_part import issue_part
from fleet.actions.place_supply_order import OrderedPart, place_supply_order
from fleet.actions.rebuild_balances import ledger_sums
from fleet.actions.record_visit import record_visit
from fleet.actions.strike_out import strike_out
from fleet.actions.transfer_stock import transfer_stock
from fleet.models import Part, Person, StockMove, Store, SupplyLine, SupplyOrder
from tests.factories import Carriage, at, make_depot, make_planner, make_store, on, stock
from tests.fleet.invariants_stock import broken_stock_rules
from tests.fleet.log_page import at as at_position
from tests.fleet.log_page import send

pytestmark = pytest.mark.django_db


@pytest.fixture
def weir() -> Carriage:
    return Carriage()


@pytest.fixture
def otto() -> Person:
    return make_planner(name="Otto")


@pytest.fixture
def shelf() -> Store:
    return make_store(code="SHELF", name="Depot shelf", site=make_depot())


@pytest.fixture
def van(weir: Carriage) -> Store:
    return make_store(code="VAN-R", name="Van of Rosa", person=weir.crew)


def client_of(person: Person) -> Client:
    client = Client()
    client.force_login(person)
    return client


def text(reply: Any) -> str:
    body = b"".join(reply.streaming_content) if reply.streaming else reply.content
    return str(body.decode())


def form_of(client: Client, address: str) -> dict[str, Any]:
    form = client.get(address).context["form"]
    values = {field.html_name: field.value() for field in form}
    return {name: value for name, value in values.items() if value not in (None, "")}


def fill(client: Client, name: str, store: Store, **said: Any) -> Any:
    address = reverse(name, args=[store.code])
    query = f"?part={said['part']}" if name == "count_stock" and "part" in said else ""
    return client.post(address, form_of(client, address + query) | said)


def lies(store: Store, part: Part) -> int:
    assert broken_stock_rules() == []
    return ledger_sums().get((store.pk, part.pk, "new"), 0)


def test_what_is_short_comes_first_and_says_so(weir: Carriage, otto: Person, shelf: Store) -> None:
    weir.s1.minimum = 5
    weir.s1.save()
    stock(shelf, weir.n1, 30)
    stock(shelf, weir.s1, 2)
    place_supply_order(by=otto, ordered_on=on("2024-03-01"), lines=[OrderedPart(weir.n1, 10, due_on=on("2024-03-20"))])
    page = text(client_of(otto).get("/stores/"))
    assert f"1\u00a0part lies below the minimum: {weir.s1.code}." in page
    assert page.index(f">{weir.s1.code}<") < page.index(f">{weir.n1.code}<")
    assert "overdue" in page
    assert "Depot\u00a0shelf\u00a030" in page
    short = text(client_of(otto).get("/stores/?shows=short"))
    assert f">{weir.n1.code}<" not in short
    sheet = csv.DictReader(io.StringIO(text(client_of(otto).get("/stores/?as=csv")).removeprefix("\ufeff")))
    told = {row["Part"]: row for row in sheet}[weir.n1.code]
    assert [told[name] for name in ("On hand", "Where", "Due", "Next delivery", "Minimum", "Below it by")] == [
        "30", "SHELF:30", "10", "2024-03-20", "0", "0",
    ]  # fmt: skip


def test_an_empty_book_says_what_to_do(otto: Person) -> None:
    assert "Nothing lies in a store of yours yet." in text(client_of(otto).get("/stores/"))
    assert "Nothing is on its way." in text(client_of(otto).get("/supply/"))
    assert "No delivery came against an order yet." in text(client_of(otto).get("/supply/deliveries/"))


def test_every_verb_has_its_form(weir: Carriage, otto: Person, shelf: Store, van: Store) -> None:
    client, part = client_of(otto), weir.n1
    assert fill(client, "receive_stock", shelf, part=part.code, quantity=10).status_code == 302
    assert fill(client, "transfer_stock", shelf, part=part.code, quantity=3, other_store=van.pk).status_code == 302
    assert fill(client, "issue_part", shelf, part=part.code, quantity=1, reason="for the tank").status_code == 302
    assert fill(client, "scrap_stock", shelf, part=part.code, quantity=1, reason="dropped").status_code == 302
    reply = fill(client, "count_stock", shelf, part=part.code, counted=4, reason="nobody knows")
    assert reply.status_code == 302
    assert (lies(shelf, part), lies(van, part)) == (4, 3)
    page = text(client.get("/stores/SHELF/"))
    assert "−1 posted; 4 on hand" in page
    assert "4\u00a0pieces of 1\u00a0part lie here" in page
    ledger = text(client.get("/stores/moves/?store=SHELF&as=csv"))
    assert [line.split(",")[3] for line in ledger.strip().splitlines()[1:]].count("-3") == 1


def test_a_refusal_stands_on_its_field_and_stores_nothing(weir: Carriage, otto: Person, shelf: Store) -> None:
    stock(shelf, weir.n1, 2)
    client = client_of(otto)
    reply = fill(client, "issue_part", shelf, part=weir.n1.code, quantity=3, reason="for the tank")
    assert reply.status_code == 422
    assert "holds 2 of" in reply.context["form"].errors["quantity"][0]
    for said in (
        {"quantity": "many"},
        {"quantity": 0},
        {"part": "NONE"},
        {"happened_on": "9999-99-99"},
        {"reason": ""},
    ):
        reply = fill(client, "issue_part", shelf, **({"part": weir.n1.code, "quantity": 1, "reason": "x"} | said))
        assert reply.status_code == 422, said
    assert lies(shelf, weir.n1) == 2


def test_sent_twice_it_moves_once(weir: Carriage, otto: Person, shelf: Store) -> None:
    client, key = client_of(otto), str(uuid.uuid4())
    for _ in range(2):
        fill(client, "receive_stock", shelf, part=weir.n1.code, quantity=4, entry_key=key)
    assert lies(shelf, weir.n1) == 4


def test_a_count_during_an_issue_is_asked_again(weir: Carriage, otto: Person, shelf: Store) -> None:
    stock(shelf, weir.n1, 5)
    client, address = client_of(otto), reverse("count_stock", args=["SHELF"])
    opened = form_of(client, f"{address}?part={weir.n1.code}")
    fill(client, "issue_part", shelf, part=weir.n1.code, quantity=1, reason="for the tank")
    reply = client.post(address, opened | {"counted": 5})
    assert reply.status_code == 422
    assert "When you began to count, 5" in reply.context["form"].errors["counted"][0]
    again = {field.html_name: field.value() for field in reply.context["form"]}
    reply = client.post(address, {name: value for name, value in again.items() if value is not None} | {"counted": 4})
    assert reply.status_code == 302
    assert StockMove.objects.get(kind="count").quantity == 0


def test_an_order_is_placed_and_its_deliveries_received(weir: Carriage, otto: Person, shelf: Store) -> None:
    client = client_of(otto)
    sheet = client.get(f"/supply/new/?line={weir.n1.code}:10").context["sheet"]
    assert sheet.lines[0]["part"].value() == weir.n1.code
    order = {
        "entry_key": str(uuid.uuid4()), "lines": "2", "supplier": "Brandt", "code": "po-7", "ordered_on": "2024-03-01",
        "line-0-part": weir.n1.code, "line-0-quantity": "10", "line-1-part": weir.s1.code, "line-1-quantity": "2",
    }  # fmt: skip
    assert client.post("/supply/new/", order)["Location"] == "/supply/PO-7/"
    lines = {line.part_id: line for line in SupplyLine.objects.all()}
    page = text(client.get("/supply/PO-7/"))
    assert "12\u00a0pieces still to come" in page
    first = form_of(client, "/supply/PO-7/") | {f"line_{lines[weir.n1.pk].pk}": "4", "happened_on": "2024-03-20"}
    assert client.post("/supply/PO-7/", first).status_code == 302
    over = form_of(client, "/supply/PO-7/") | {f"line_{lines[weir.n1.pk].pk}": "7"}
    reply = client.post("/supply/PO-7/", over)
    assert reply.status_code == 422
    assert "still to come" in reply.context["form"].errors[f"line_{lines[weir.n1.pk].pk}"][0]
    assert lies(shelf, weir.n1) == 4
    assert "1\u00a0delivery so far took 19\u00a0days" in text(client.get("/supply/deliveries/")).replace(
        " days", "\u00a0days"
    )


def test_wrong_orders_are_refused_on_their_line(weir: Carriage, otto: Person) -> None:
    client = client_of(otto)
    empty = {"entry_key": str(uuid.uuid4()), "lines": "1"}
    assert "holds no part yet" in text(client.post("/supply/new/", empty))
    bare = empty | {"line-0-part": weir.n1.code}
    assert "How many? Enter the number." in text(client.post("/supply/new/", bare))
    assert client.post("/supply/new/", bare | {"lines": "one hundred"}).status_code == 422
    twice = {**bare, "lines": "2", "line-0-quantity": "1", "line-1-part": weir.n1.code, "line-1-quantity": "2"}
    assert "stands twice on this order" in text(client.post("/supply/new/", twice))
    assert not SupplyOrder.objects.exists()


def test_who_orders_what_somebody_ordered_meanwhile_is_told_once(weir: Carriage, otto: Person) -> None:
    client = client_of(otto)
    opened = client.get("/supply/new/").context["sheet"].order
    hidden = {name: str(opened[name].value()) for name in ("entry_key", "newest")}
    order = hidden | {"lines": "1", "line-0-part": weir.n1.code, "line-0-quantity": "10"}
    place_supply_order(by=weir.manager, code="PO-1", lines=[OrderedPart(weir.n1, 20)])
    told = client.post("/supply/new/", order)
    assert told.status_code == 422
    assert "20 of N1 since you opened this page (order PO-1)" in text(told).replace(weir.n1.code, "N1")
    assert SupplyOrder.objects.count() == 1
    newest = told.context["sheet"].order["newest"].value()
    assert client.post("/supply/new/", order | {"newest": newest}).status_code == 302
    assert client.post("/supply/new/", order | {"entry_key": str(uuid.uuid4()), "newest": "rubbish"}).status_code == 422
    assert SupplyOrder.objects.count() == 2


def test_a_line_is_changed_and_called_off(weir: Carriage, otto: Person) -> None:
    order = place_supply_order(by=otto, code="PO-8", ordered_on=on("2024-03-01"), lines=[OrderedPart(weir.n1, 10)])
    client, line = client_of(otto), order.lines.get()
    change = reverse("change_supply_line", args=["PO-8", weir.n1.code])
    assert client.post(change, {"version": 1, "quantity": 12, "due_on": "2024-02-01"}).status_code == 422
    assert client.post(change, {"version": 1, "quantity": 12, "due_on": "2024-04-01"}).status_code == 302
    call_off = reverse("call_off_supply_line", args=["PO-8", weir.n1.code])
    assert "changed this" in text(client.post(call_off, {"version": 1, "reason": "late"}))
    assert client.post(call_off, {"version": 2, "reason": "supplier gave up"}).status_code == 302
    line.refresh_from_db()
    assert line.struck_out == "supplier gave up"


def test_a_crew_sees_its_van_and_no_orders(weir: Carriage, shelf: Store, van: Store, otto: Person) -> None:
    stock(van, weir.n1, 2)
    stock(shelf, weir.n1, 9)
    client = client_of(weir.crew)
    page = text(client.get("/stores/"))
    assert "Van of Rosa" in page
    assert "Depot shelf" not in page
    assert "Next delivery" not in page
    assert "Minimum" not in page  # the whole book's: no matter for one van
    assert "1\u00a0part lies in the stores that you see." in page
    assert client.get("/stores/SHELF/").status_code == 404
    for address in ("/supply/", "/supply/new/", "/stores/VAN-R/receive/", "/stores/VAN-R/count/"):
        assert client.get(address).status_code == 403, address
    assert client.get("/stores/VAN-R/issue/").status_code == 200
    contact = client_of(weir.contact)
    for address in ("/stores/", "/stores/VAN-R/", "/stores/moves/", "/bench/"):
        assert contact.get(address).status_code == 403, address
    assert "Stores" not in text(contact.get("/sites/"))


# --- Log offers the crew's own store


def test_log_takes_the_new_part_off_the_van(weir: Carriage, van: Store) -> None:
    weir.fit()
    stock(van, weir.n2, 2)
    client = client_of(weir.crew)
    page = text(client.get(reverse("log_visit", args=[weir.module.code])))
    assert "New parts come from" in page
    assert f"{weir.n2.code}, 2 with you" in page
    reply = send(client, weir.module, at_position(weir.nut, outcome="failed", mode=weir.worn, part=weir.n2))
    assert reply.status_code == 302
    move = StockMove.objects.get(kind="issue")
    assert (move.store, move.part, move.visit.module, lies(van, weir.n2)) == (van, weir.n2, weir.module, 1)


def test_log_is_never_held_up_by_an_empty_van(weir: Carriage, van: Store) -> None:
    weir.fit()
    client = client_of(weir.crew)
    reply = send(client, weir.module, at_position(weir.nut, outcome="failed", mode=weir.worn, part=weir.n2))
    assert reply.status_code == 302
    assert not StockMove.objects.exists()
    told = [str(each) for each in reply.wsgi_request._messages]
    assert any(f"you carry none of {weir.n2.code}" in each for each in told)


def test_log_may_leave_the_store_alone(weir: Carriage, van: Store) -> None:
    weir.fit()
    stock(van, weir.n2, 2)
    part = at_position(weir.nut, outcome="failed", mode=weir.worn, part=weir.n2)
    assert send(client_of(weir.crew), weir.module, part, issue_from="none").status_code == 302
    assert lies(van, weir.n2) == 2


def test_without_a_store_of_their_own_log_asks_nothing(weir: Carriage) -> None:
    page = text(client_of(weir.crew).get(reverse("log_visit", args=[weir.module.code])))
    assert "New parts come from" not in page


# --- corrections, history, search


def test_a_move_is_struck_out_on_screen(weir: Carriage, otto: Person, shelf: Store) -> None:
    move = stock(shelf, weir.n1, 5)
    client = client_of(otto)
    address = reverse("strike_out_record", args=["move", move.pk])
    assert client.get(address).status_code == 200
    assert client.post(address, {"version": 1, "reason": "booked twice"})["Location"] == "/stores/SHELF/"
    assert lies(shelf, weir.n1) == 0
    assert client.get(reverse("correct_record", args=["move", move.pk])).status_code == 404
    assert "booked twice" in text(client.get("/history/?kind=stock-move"))


def test_what_lies_elsewhere_is_not_named_nor_undone(weir: Carriage, otto: Person, shelf: Store, van: Store) -> None:
    """A van serves several sites and is filled at a depot: who sees one site reads and undoes that part of it."""
    away = Carriage()
    weir.crew.sites.add(away.site)
    stock(shelf, weir.n1, 5)
    stock(van, weir.n1, 5, happened_on=on("2024-01-10"))
    transfer = transfer_stock(by=otto, store=shelf, other_store=van, part=weir.n1, quantity=1)
    visit = record_visit(by=weir.crew, module=away.module, happened_at=at("2024-03-09"))
    issue_part(by=weir.crew, store=van, part=weir.n1, visit=visit)
    limited = make_planner(sites=[weir.site])
    client = client_of(limited)
    for address in ("/stores/moves/", "/stores/moves/?as=csv", "/stores/VAN-R/"):
        page = text(client.get(address))
        assert "another store" in page, address
        assert "another site" in page, address
        for name in ("Depot shelf", "SHELF", away.module.code + "<", away.module.code + ","):
            assert name not in page, f"{address} names {name}"
        assert "shelf" in text(client_of(otto).get(address)).casefold()
    for address in ("/history/?kind=stock-move", "/history/?kind=stock-move&as=csv"):
        told = text(client.get(address))
        assert "VAN-R" in told
        assert "SHELF" not in told
        assert visit.code not in told
        assert visit.code in text(client_of(otto).get(address))
    strike = reverse("strike_out_record", args=["move", transfer.pk])
    assert client.get(strike).status_code == 404
    assert client.post(strike, {"version": 1, "reason": "mine"}).status_code == 404
    with pytest.raises(NotAllowed, match="none of yours"):
        strike_out(by=limited, record=transfer, reason="mine")
    assert (lies(shelf, weir.n1), lies(van, weir.n1)) == (4, 5)
    assert client_of(otto).get(strike).status_code == 200


def test_search_finds_stores_and_orders(weir: Carriage, otto: Person, shelf: Store) -> None:
    place_supply_order(by=otto, code="PO-77", supplier="Brandt", ordered_on=on("2024-03-01"),
                       lines=[OrderedPart(weir.n1, 1)])  # fmt: skip
    client = client_of(otto)
    assert "/stores/SHELF/" in text(client.get("/search/?q=depot+shelf"))
    assert "/supply/PO-77/" in text(client.get("/search/?q=po-77"))
    assert "/supply/PO-77/" in text(client.get("/search/?q=brandt"))
    assert "/supply/PO-77/" not in text(client_of(weir.crew).get("/search/?q=brandt"))


def test_a_store_is_added_and_changed(weir: Carriage, otto: Person) -> None:
    client = client_of(otto)
    reply = client.post("/stores/new/", {"code": "box-1", "name": "Box", "site": weir.site.code})
    assert reply["Location"] == "/stores/BOX-1/"
    assert client.post("/stores/new/", {"code": "box-1"}).status_code == 422
    assert (
        client.post("/stores/BOX-1/edit/", {"code": "BOX-1", "name": "Box at the weir", "version": 1}).status_code
        == 302
    )
    assert Store.objects.get(code="BOX-1").name == "Box at the weir"
