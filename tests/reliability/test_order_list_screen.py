"""The order list on screen: what to order and why, ticked lines as one supply order, files, refusals, and who sees it.

Cast: Otto the storekeeper, who sees all; Petra, a planner of one site; Cleo the crew; Greta at the bench.
"""

from __future__ import annotations

import copy
import datetime as dt
import html
import json
import re
import uuid
from collections.abc import Iterator
from typing import Any

import pytest
import time_machine
from django.test import Client

from fleet.actions.issue_part import issue_part
from fleet.formats import long_day
from fleet.models import Book, DataVersion, Site, SupplyLine, SupplyOrder, Work
from fleet.work import run_here
from reliability.forecasts.kept_order import KIND, order_document
from reliability.models import KeptResult
from tests.factories import make_bench, make_contact, make_crew, make_planner
from tests.reliability.supply_fleet import TODAY, SupplyFleet, count_today

pytestmark = pytest.mark.django_db
NOON = dt.datetime.combine(TODAY, dt.time(12), tzinfo=dt.UTC)


@pytest.fixture(autouse=True)
def noon() -> Iterator[None]:
    with time_machine.travel(NOON, tick=False):
        yield


@pytest.fixture(scope="module")
def made(made_once: Any) -> SupplyFleet:
    def make() -> SupplyFleet:
        found = SupplyFleet(on_hand=0)
        for ordered, received in ((150, 130), (100, 77), (60, 38)):
            found.deliver(ordered, received, 5)
        return found

    with time_machine.travel(NOON, tick=False):
        return made_once(make)


@pytest.fixture
def world(made: SupplyFleet) -> SupplyFleet:
    return copy.deepcopy(made)


@pytest.fixture
def otto(client: Client, world: SupplyFleet) -> Client:
    count_today()
    client.force_login(make_planner(code="OTTO"))
    return client


def line_of(document: dict[str, Any], part: str = "N2") -> dict[str, Any]:
    return next(line for line in document["lines"] if line["part"] == part)


def test_it_says_what_to_order_how_sure_and_why(otto: Client) -> None:
    page = otto.get("/stores/order/").content.decode()
    assert "to order today for" in page
    assert re.search(r"17 on hand last (to about|beyond)", page)
    assert "an order placed today comes about" in page
    assert "Packs of 5 make it" in page
    assert "They do not certify that any part is safe" in page


def test_figures_hang_together(otto: Client) -> None:
    line = line_of(otto.get("/stores/order/?as=json").json())
    assert line["on_hand"] == 17
    low, high = line["use_bands"]["0.8"]
    assert low <= line["use_mean"] <= high
    assert line["reorder_level"] <= line["order_up_to"]
    assert line["quantity"] % 5 == 0
    assert line["quantity"] >= line["order_up_to"] - 17 > line["quantity"] - 5
    assert float(line["cost"]) == 20 * line["quantity"]
    assert line["lead_orders"] > 2
    assert 0 <= line["chance_before_delivery"] <= 1


def test_the_same_figures_are_a_file_and_a_sheet_of_paper(otto: Client) -> None:
    answer = otto.get("/stores/order/?as=csv")
    lines = b"".join(answer.streaming_content).decode("utf-8-sig").splitlines()
    assert lines[0].startswith("part,name,supplier,on_hand,due,expected_use,use_from_80,use_to_80")
    assert any(line.startswith("N2,,Cooper,17,0,") for line in lines[1:])
    sheet = otto.get("/stores/order/?as=print").content.decode()
    assert "Order list" in sheet
    assert 'type="checkbox"' not in sheet


def test_filters_and_order_stay_in_the_address(otto: Client) -> None:
    def parts(query: str) -> list[str]:
        return [line["part"] for line in otto.get(f"/stores/order/?as=json&{query}").json()["lines"]]

    assert parts("q=n2") == ["N2"]
    assert parts("q=screw") == []
    assert parts("supplier=cooper&sort=part") == ["N1", "N2"]
    assert parts("sort=-part") == ["N2", "N1"]
    assert parts("shows=order") == ["N2"]
    assert parts("shows=old") == ["N1"]
    assert parts("component=NUT&sort=on_hand") == ["N1", "N2"]


def ticks(**fields: Any) -> dict[str, Any]:
    return {"entry_key": str(uuid.uuid4()), **fields}


def test_ticked_lines_become_one_order_with_the_pieces_that_stand_there(otto: Client) -> None:
    SupplyOrder.objects.all()
    before = SupplyOrder.objects.count()
    answer = otto.post("/stores/order/", ticks(tick_N2="on", pieces_N2="40", tick_N1="on", pieces_N1="5"))
    order = SupplyOrder.objects.latest("pk")
    assert answer.status_code == 302
    assert answer["Location"] == f"/supply/{order.code}/"
    assert SupplyOrder.objects.count() == before + 1
    assert dict(order.lines.values_list("part__code", "quantity")) == {"N1": 5, "N2": 40}
    assert order.supplier == "Cooper"
    assert line_of(otto.get("/stores/order/?as=json").json())["due"] == 40, "the list knows of it at once"


def test_sent_twice_it_is_ordered_once(otto: Client) -> None:
    sent = ticks(tick_N2="on", pieces_N2="40")
    first, again = (otto.post("/stores/order/", sent) for _ in range(2))
    assert first["Location"] == again["Location"]
    assert SupplyLine.objects.filter(quantity=40).count() == 1


def test_who_orders_from_a_list_that_somebody_ordered_from_is_told(otto: Client) -> None:
    opened = otto.get("/stores/order/").context["ticks"]["newest"].value()
    otto.post("/stores/order/", ticks(tick_N2="on", pieces_N2="40", newest=opened))
    late = otto.post("/stores/order/", ticks(tick_N2="on", pieces_N2="40", newest=opened))
    assert late.status_code == 422
    assert "since you opened this page" in late.content.decode()
    assert SupplyLine.objects.filter(quantity=40).count() == 1
    newest = late.context["ticks"]["newest"].value()
    assert otto.post("/stores/order/", ticks(tick_N2="on", pieces_N2="40", newest=newest)).status_code == 302


@pytest.mark.parametrize(
    ("sent", "words"),
    [
        ({}, "No line is ticked"),
        ({"tick_N2": "on", "pieces_N2": ""}, "How many?"),
        ({"tick_N2": "on", "pieces_N2": "0"}, "Write 1 or more"),
        ({"tick_N2": "on", "pieces_N2": "many"}, "no whole number of pieces"),
        ({"tick_N2": "on", "pieces_N2": "99999999"}, "are no order"),
    ],
)
def test_what_cannot_be_ordered_is_said_on_its_line_and_nothing_is(otto: Client, sent: Any, words: str) -> None:
    before = SupplyOrder.objects.count()
    answer = otto.post("/stores/order/", ticks(**sent))
    assert answer.status_code == 422
    assert words in answer.content.decode()
    assert SupplyOrder.objects.count() == before


def test_what_is_not_ticked_is_not_looked_at(otto: Client) -> None:
    answer = otto.post("/stores/order/", ticks(tick_N2="on", pieces_N2="5", pieces_N1="rubbish"))
    assert answer.status_code == 302


@pytest.mark.parametrize(
    "query",
    ["service=40", "service=100", "superseding=SAIL", "superseding_from=2025-06-01",
     "retrofit_a_week=-1&superseding=N1",
     "component=SAIL", "shows=what"],
)  # fmt: skip
def test_what_cannot_be_asked_is_refused_in_words(otto: Client, query: str) -> None:
    answer = otto.get(f"/stores/order/?{query}")
    assert answer.status_code == 422
    assert "cannot be answered yet" in answer.content.decode()


def test_a_higher_wanted_chance_and_another_part_change_the_list(otto: Client) -> None:
    usual = line_of(otto.get("/stores/order/?as=json").json())
    surer = line_of(otto.get("/stores/order/?as=json&service=99.5").json())
    assert surer["order_up_to"] > usual["order_up_to"]
    told = otto.get("/stores/order/?as=json&superseding=N1").json()
    assert line_of(told, "N1")["use_mean"] == pytest.approx(usual["use_mean"], rel=0.1)
    assert line_of(told, "N2")["use_mean"] == 0
    assert "As assumed" in otto.get("/stores/order/?superseding=N1").content.decode()


def test_one_issue_costs_one_line_and_the_rest_is_kept(otto: Client, world: SupplyFleet) -> None:
    first = order_document("EUR")
    assert KeptResult.objects.filter(kind=KIND).count() == 1
    issue_part(by=None, store=world.shelf, part=world.n2, quantity=1, reason="broken in the box")
    second = order_document("EUR")
    assert line_of(second)["on_hand"] == line_of(first)["on_hand"] - 1
    assert line_of(second, "N1") == line_of(first, "N1")
    assert json.loads(bytes(KeptResult.objects.get(kind=KIND).payload)) == second


def test_the_books_minimum_is_kept_and_its_review_period_counts(otto: Client, world: SupplyFleet) -> None:
    usual = line_of(otto.get("/stores/order/?as=json").json())
    world.n2.minimum = usual["order_up_to"] + 50
    world.n2.save()
    raised = line_of(otto.get("/stores/order/?as=json").json())
    assert raised["order_up_to"] == usual["order_up_to"] + 50
    assert "The book keeps at least" in otto.get("/stores/order/").content.decode()
    world.n2.minimum = 0
    world.n2.save()
    book = Book.load()
    book.review_period_days = 60
    book.save()
    assert line_of(otto.get("/stores/order/?as=json").json())["order_up_to"] > usual["order_up_to"]


def early(client: Client) -> Client:
    """A planner before the worker has counted."""
    client.force_login(make_planner(code="EVA"))
    return client


def look(client: Client, address: str) -> Any:
    """The page's own look, as its script sends it."""
    return client.get(address, headers={"HX-Request": "true", "HX-Trigger": "counting"})


def test_before_the_first_count_the_page_comes_at_once_and_the_background_counts(
    client: Client, world: SupplyFleet
) -> None:
    page = early(client).get("/stores/order/?sort=part").content.decode()
    assert "being counted in the background" in page
    assert 'hx-get="/stores/order/?sort=part"' in page
    assert '<a href="/stores/order/?sort=part">Look again</a>' in page, "without scripts"
    assert "The list of" not in page
    assert not KeptResult.objects.exists(), "nothing was counted"
    assert look(client, "/stores/order/?sort=part").status_code == 204
    assert Work.objects.count() == 1, "counted once, however often somebody looks"
    run_here(Work.objects.get())
    told = look(client, "/stores/order/?sort=part")
    assert told.status_code == 200
    assert "tick_N2" in told.content.decode()
    assert "being counted" not in told.content.decode()


def test_meanwhile_the_last_days_list_is_shown_with_its_day_and_nothing_is_ordered_from_it(
    client: Client, world: SupplyFleet
) -> None:
    with time_machine.travel(NOON - dt.timedelta(days=2), tick=False):
        count_today()
        before = order_document("EUR")
    page = early(client).get("/stores/order/").content.decode()
    day = long_day(TODAY - dt.timedelta(days=2))
    assert f"The list of {day}" in page
    assert f"It was true on {day}" in page
    assert line_of(before)["reasons"][0] in html.unescape(page)
    assert "tick_N2" not in page
    assert "Order all ticked lines" not in page
    assert "?as=csv" not in page


def test_a_count_that_failed_says_so_and_is_tried_again(client: Client, world: SupplyFleet) -> None:
    early(client).get("/stores/order/")
    Work.objects.update(state="failed", message="The disk is full.")
    answer = look(client, "/stores/order/")
    assert "The last try came to no end. The disk is full." in answer.content.decode()
    assert Work.objects.count() == 1
    with time_machine.travel(NOON + dt.timedelta(minutes=6), tick=False):
        assert look(client, "/stores/order/").status_code == 204
        assert Work.objects.count() == 2
    with time_machine.travel(NOON + dt.timedelta(minutes=8), tick=False):
        assert "It has been waiting since" in client.get("/stores/order/").content.decode()


def test_the_days_own_count_in_line_does_not_keep_somebody_waiting(client: Client, world: SupplyFleet) -> None:
    Work.objects.create(kind="count_use", title="Counting")
    early(client).get("/stores/order/")
    assert Work.objects.filter(person__code="EVA").count() == 1
    client.get("/stores/order/")
    assert Work.objects.count() == 2


def test_files_and_what_is_sent_wait_for_the_count(client: Client, world: SupplyFleet) -> None:
    assert line_of(early(client).get("/stores/order/?as=json").json())["on_hand"] == 17
    assert not Work.objects.exists()


def test_what_came_after_the_count_is_told_and_counting_again_goes_to_the_background(otto: Client) -> None:
    assert "Count again" not in otto.get("/stores/order/").content.decode()
    DataVersion.raise_version()
    assert "Entries came in since then" in otto.get("/stores/order/").content.decode()
    assert otto.post("/stores/order/", {"again": "yes"}).status_code == 302
    assert Work.objects.get().kind == "count_use"


def test_who_sees_some_sites_is_told_why_there_is_no_list(client: Client, world: SupplyFleet) -> None:
    client.force_login(make_planner(code="PETRA", sites=[Site.objects.get(code="LOCK")]))
    for method in (client.get, client.post):
        page = method("/stores/order/")
        assert page.status_code == 200
        assert "Ask a planner who sees all sites" in page.content.decode()
        assert "tick_N2" not in page.content.decode()


def test_crew_bench_and_contact_get_no_order_list(client: Client, world: SupplyFleet) -> None:
    site = Site.objects.get(code="LOCK")
    for person in (make_crew(site), make_bench(world.depot), make_contact(site)):
        client.force_login(person)
        assert client.get("/stores/order/").status_code == 403
        assert client.get("/stores/places/").status_code == 403


def test_an_empty_book_says_what_to_do_first(client: Client) -> None:
    client.force_login(make_planner())
    page = client.get("/stores/order/")
    assert page.status_code == 200
    assert "There is nothing to order yet." in page.content.decode()
