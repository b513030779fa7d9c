"""Where to keep spares and how long stock lasts, from records; what Today tells; who sees what."""

from __future__ import annotations

import copy
import datetime as dt
from collections.abc import Iterator
from typing import Any

import pytest
import time_machine
from django.test import Client

from fleet.models import Component, Site
from fleet.work import run_here
from fleet.work.enqueue import enqueue
from reliability.forecasts.coming_use import kept_uses
from reliability.forecasts.cover import store_cover
from reliability.forecasts.kept_order import order_document
from reliability.forecasts.place_records import DEPOT, placed
from tests.factories import (
    make_bench,
    make_contact,
    make_crew,
    make_manager,
    make_person,
    make_planner,
    make_store,
    stock,
)
from tests.reliability.small_fleet import day
from tests.reliability.supply_fleet import TODAY, SupplyFleet
from tests.reliability.test_forecast import AS_OF

pytestmark = pytest.mark.django_db
NOON = dt.datetime.combine(TODAY, dt.time(12), tzinfo=dt.UTC)


@pytest.fixture(autouse=True)
def noon() -> Iterator[None]:
    with time_machine.travel(NOON, tick=False):
        yield


@pytest.fixture(scope="module")
def made(made_once: Any) -> SupplyFleet:
    with time_machine.travel(NOON, tick=False):
        return made_once(lambda: SupplyFleet(on_hand=6))


@pytest.fixture
def world(made: SupplyFleet) -> SupplyFleet:
    return copy.deepcopy(made)


def uses() -> dict:
    return kept_uses(Component.objects.all(), count=True)


def test_records_become_stock_by_place(world: SupplyFleet) -> None:
    van = make_store(code="VAN", person=make_crew(Site.objects.get(code="LOCK")))
    stock(van, world.n2, 3, happened_on=day(AS_OF - 10))
    found = placed(uses(), TODAY)
    (part,) = found.parts
    assert (part.part, part.unit_cost) == ("N2", 20.0)
    assert part.at_depot == 6 + 3, "what a crew carries counts as lying at the depot"
    assert part.at_sites == {"LOCK": 2}
    assert found.stores == ["LOCK"]
    assert set(part.use_a_day) == {"LOCK", "WEIR"}
    assert sum(part.use_a_day.values()) * 91 == pytest.approx(uses()["NUT"].used["N2"].mean)
    world.n2.unit_cost = None
    world.n2.save()
    assert placed(uses(), TODAY).without_price == ["N2"]


def test_money_against_waiting_as_sentence_chart_table_and_files(client: Client, world: SupplyFleet) -> None:
    client.force_login(make_planner())
    page = client.get("/stores/places/?budget=200").content.decode()
    assert "With the stock kept today" in page
    assert "wait for a part at any time, on average" in page
    assert "do so only for the way from the depot to a" in page
    document = client.get("/stores/places/?budget=200&as=json").json()
    waiting = [document["now"]["mean"], *(step["waiting"]["mean"] for step in document["curve"])]
    assert waiting == sorted(waiting, reverse=True)
    assert len(waiting) > 3
    assert document["curve"][-1]["money"] <= 200
    places = {each["place"] for step in document["curve"] for each in step["changes"]}
    assert places <= {DEPOT, "LOCK"}, "WEIR has no store"
    everywhere = client.get("/stores/places/?budget=200&everywhere=on&as=json").json()
    assert everywhere["curve"][-1]["waiting"]["mean"] <= document["curve"][-1]["waiting"]["mean"] + 1e-9
    lines = b"".join(client.get("/stores/places/?budget=200&as=csv").streaming_content).decode("utf-8-sig").splitlines()
    assert len(lines) == 2 + len(document["curve"])


@pytest.mark.parametrize("query", ["budget=-1", "budget=lots", "ship=400"])
def test_what_cannot_be_asked_is_refused(client: Client, world: SupplyFleet, query: str) -> None:
    client.force_login(make_planner())
    answer = client.get(f"/stores/places/?{query}")
    assert answer.status_code == 422
    assert "cannot be answered yet" in answer.content.decode()


def test_a_planner_of_some_sites_is_told_why_not(client: Client, world: SupplyFleet) -> None:
    client.force_login(make_planner(sites=[Site.objects.get(code="LOCK")]))
    page = client.get("/stores/places/").content.decode()
    assert "Ask a planner who sees all sites" in page
    assert "WEIR" not in page


def test_a_box_lasts_by_the_use_at_its_site(world: SupplyFleet) -> None:
    use = uses()["NUT"]
    (here,) = store_cover(world.box, {"NUT": use})
    (depot,) = store_cover(world.shelf, {"NUT": use})
    assert here.a_week == pytest.approx(use.use_at_sites("N2")["LOCK"] / 13, rel=0.1)
    assert depot.a_week == pytest.approx(use.used["N2"].mean / 13, rel=0.05)
    middle, low, high = depot.weeks
    assert middle is not None
    assert low is not None
    assert low <= middle <= (high or 99)
    assert middle == pytest.approx(6 / depot.a_week, rel=0.5)
    assert store_cover(world.box, {})[0].known is False


def test_stores_tell_how_long_stock_lasts_to_those_who_see_all(client: Client, world: SupplyFleet) -> None:
    lock = Site.objects.get(code="LOCK")
    client.force_login(make_manager())
    assert "Lasts, weeks" not in client.get("/stores/").content.decode(), "nothing was counted yet, and no page counts"
    order_document("EUR")
    assert "Lasts, weeks" in client.get("/stores/").content.decode()
    lines = b"".join(client.get("/stores/?as=csv").streaming_content).decode("utf-8-sig").splitlines()
    assert "Lasts, weeks" in lines[0]
    for person in (make_planner(sites=[lock]), make_crew(lock), make_bench(world.depot)):
        client.force_login(person)
        assert "Lasts, weeks" not in client.get("/stores/").content.decode()


def test_a_stores_page_brings_in_how_long_it_lasts(client: Client, world: SupplyFleet) -> None:
    lock = Site.objects.get(code="LOCK")
    client.force_login(make_planner(sites=[lock]))
    assert 'hx-get="/stores/BOX/lasts/"' in client.get("/stores/BOX/").content.decode()
    assert "being counted in the background" in client.get("/stores/BOX/lasts/").content.decode()
    look = {"HX-Request": "true", "HX-Trigger": "counting"}
    assert client.get("/stores/BOX/lasts/", headers=look).status_code == 204
    uses()
    page = client.get("/stores/BOX/lasts/").content.decode()
    assert "From the use expected at this site." in page
    assert client.get("/stores/SHELF/lasts/").status_code == 404, "not a store of theirs"
    client.force_login(make_manager())
    assert "As if this depot alone served all sites." in client.get("/stores/SHELF/lasts/").content.decode()
    for person in (make_crew(lock), make_bench(world.depot), make_contact(lock)):
        client.force_login(person)
        assert client.get("/stores/BOX/lasts/").status_code == 403


def test_today_tells_what_runs_out_and_how_the_bench_stands_once_it_was_counted(
    client: Client, world: SupplyFleet
) -> None:
    for number in range(12):
        world.job(120 - 9 * number, 110 - 9 * number)
    for number in range(8):
        world.job(8 - number, None)
    world.hours(6.0)
    client.force_login(make_manager())
    page = client.get("/").content.decode()
    assert "May run out" not in page
    run_here(enqueue("count_use", "Counting", {}, None))
    page = client.get("/").content.decode()
    assert "May run out before the next delivery" in page
    assert "there will be about" in page
    client.force_login(make_planner(sites=[Site.objects.get(code="LOCK")]))
    assert "May run out" not in client.get("/").content.decode()
    client.force_login(make_person(role="contact"))
    page = client.get("/").content.decode()
    assert "May run out" not in page
    assert "there will be about" not in page
