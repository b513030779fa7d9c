"""The bench's forecast from records: what comes, what it takes, hours there are; its page, panel, files and rights."""

from __future__ import annotations

import copy
import datetime as dt
from collections.abc import Iterator
from typing import Any

import pytest
import time_machine
from django.test import Client

from fleet.actions.move_job import move_job
from fleet.formats import long_day
from fleet.models import BenchCapacity, BenchHours, Site, Work
from fleet.work import run_here
from reliability.forecasts.bench_records import COMING, OTHER, RETROFIT, bench_records, kind_of
from reliability.forecasts.kept_backlog import KIND, BenchQuestion, bench_document
from reliability.models import KeptResult
from tests.factories import make_bench, make_book, make_contact, make_crew, make_depot, make_manager, make_planner
from tests.reliability.supply_fleet import TODAY, SupplyFleet, count_today

pytestmark = pytest.mark.django_db
NOON = dt.datetime.combine(TODAY, dt.time(12), tzinfo=dt.UTC)


@pytest.fixture(autouse=True)
def noon() -> Iterator[None]:
    with time_machine.travel(NOON, tick=False):
        yield


def stored() -> SupplyFleet:
    """Every other failure of the past year brought a module in; four wait, and the bench has ten hours a week."""
    found = SupplyFleet()
    for number in range(30):
        found.job(300 - 9 * number, 290 - 9 * number)
    for number in range(3):
        found.job(8 - number, None)
    found.job(3, None, reason="the crew did not say")
    found.hours(10.0)
    make_book(bench_target=2)
    return found


@pytest.fixture(scope="module")
def made(made_once: Any) -> SupplyFleet:
    with time_machine.travel(NOON, tick=False):
        return made_once(stored)


@pytest.fixture
def world(made: SupplyFleet) -> SupplyFleet:
    return copy.deepcopy(made)


def test_the_reason_says_which_component_brought_it() -> None:
    names = {"drive nut": "NUT", "nut": "NUT"}
    assert kind_of("Drive nut: worn out", names) == "NUT"
    assert kind_of("nut", names) == "NUT"
    assert kind_of("noise: drive nut?", names) == OTHER
    assert kind_of("Retrofit: wiper lip", names) == RETROFIT
    assert kind_of("", names) == OTHER


def test_records_become_the_bench(world: SupplyFleet) -> None:
    found = bench_records(count_today()).bench
    assert found is not None
    kinds = {kind.kind: kind for kind in found.kinds}
    assert set(kinds) == {"NUT", OTHER, RETROFIT}
    assert len(kinds["NUT"].hours) == kinds["NUT"].finished == kinds["NUT"].ready == 30
    assert kinds["NUT"].came == 33
    failures = kinds["NUT"].of
    assert failures >= 33
    assert len(found.jobs) == 4
    assert [job.kind for job in found.jobs].count(OTHER) == 1
    assert found.target == 2
    assert found.ready_modules == 30, "the modules that were finished stand at the depot"
    assert found.fleet == 30
    assert set(found.hours.weeks.values()) == {10.0}


def test_a_past_day_is_told_as_it_was(world: SupplyFleet) -> None:
    """Fifty days ago the jobs that ended since were open, and nothing of today had come."""
    then = TODAY - dt.timedelta(days=50)
    found = bench_records({}, as_of=then).bench
    assert found is not None
    open_then = [number for number in range(30) if 300 - 9 * number >= 50 > 290 - 9 * number]
    assert len(found.jobs) == len(open_then) > 0
    assert {kind.kind for kind in found.kinds} == {"NUT", RETROFIT}


def test_hours_that_nobody_set_count_as_the_others_or_as_booked(world: SupplyFleet) -> None:
    BenchCapacity.objects.filter(week__gt=TODAY + dt.timedelta(days=40)).delete()
    told = bench_records(count_today())
    assert told.bench is not None
    assert told.bench.hours.usual_week == 10.0
    assert "are not set" in told.notes[0]
    BenchCapacity.objects.all().delete()
    booked = bench_records(count_today())
    assert booked.bench is not None
    recent = sum(BenchHours.objects.filter(day__gt=TODAY - dt.timedelta(weeks=13)).values_list("hours", flat=True))
    assert booked.bench.hours.usual_week == pytest.approx(recent / 13)
    BenchHours.objects.all().delete()
    assert "Set its hours" in bench_records(count_today()).refused


def test_a_wait_for_parts_is_read_from_the_history_of_stages(world: SupplyFleet) -> None:
    with time_machine.travel(NOON - dt.timedelta(days=20)):
        job = world.job(20, None)
    with time_machine.travel(NOON - dt.timedelta(days=15)):
        move_job(by=None, job=job, stage="on the bench", day=TODAY - dt.timedelta(days=15))
    with time_machine.travel(NOON - dt.timedelta(days=12)):
        move_job(by=None, job=job, stage="waiting for parts", waits_for=world.n1)
    bench = bench_records(count_today()).bench
    assert bench is not None
    waits = [each for each in bench.jobs if each.waits_since is not None]
    assert [(each.waits_since, each.parts_due_on) for each in waits] == [(TODAY - dt.timedelta(days=12), None)]


def test_it_says_where_the_backlog_goes_and_what_would_hold_it(client: Client, world: SupplyFleet) -> None:
    client.force_login(make_manager())
    count_today()
    page = client.get("/bench/backlog/").content.decode()
    for words in ("4\u00a0modules are at the bench", "80 of 100 cases", "hours of work come in a week", "ready",
                  "To bring the backlog to 2 or fewer by", "Hours a week that hold the target"):  # fmt: skip
        assert words in page
    document = client.get("/bench/backlog/?as=json").json()
    assert document["modules"]["mean"][0] == 4
    assert len(document["weeks"]) == 14
    lines = b"".join(client.get("/bench/backlog/?as=csv").streaming_content).decode("utf-8-sig").splitlines()
    assert len(lines) == 15
    assert lines[1].startswith(f"{TODAY.isoformat()},4.0,4.0,4.0")


def test_more_hours_shorten_the_queue_and_more_retrofits_lengthen_it(client: Client, world: SupplyFleet) -> None:
    client.force_login(make_manager())
    count_today()
    more = client.get("/bench/backlog/?as=json&more_hours=10").json()["difference"]
    assert more["modules"]["mean"][-1] < 0
    slower = client.get("/bench/backlog/?as=json&retrofits_a_week=4").json()["difference"]
    assert slower["modules"]["mean"][-1] > 0
    assert "modules fewer at the bench" in client.get("/bench/backlog/?more_hours=10").content.decode()


@pytest.mark.parametrize(
    ("query", "words"),
    [
        ("target_on=2020-01-01", "This day has passed"),
        ("target_on=2030-01-01", "Choose an earlier day"),
        ("more_hours=lots", "This is no number"),
        ("retrofits_a_week=-2", "Write 0 or more"),
        ("more_hours=4&from_on=2025-06-10&until_on=2025-06-01", "Exchange them"),
        ("from_on=2025-06-10", "How many hours a week?"),
    ],
)
def test_what_cannot_be_asked_is_refused_in_words(client: Client, world: SupplyFleet, query: str, words: str) -> None:
    client.force_login(make_manager())
    answer = client.get(f"/bench/backlog/?{query}")
    assert answer.status_code == 422
    assert words in answer.content.decode()


def test_it_is_kept_until_something_changes(world: SupplyFleet) -> None:
    first = bench_document()
    made = KeptResult.objects.get(kind=KIND).made_at
    assert bench_document() == first
    assert KeptResult.objects.get(kind=KIND).made_at == made
    world.job(0, None)
    assert bench_document()["modules"]["mean"][0] == 5
    assert bench_document(BenchQuestion(more_hours=5))["modules"]["mean"][0] == 5
    assert KeptResult.objects.filter(kind=KIND).count() == 1, "a what-if is not kept"


def test_before_the_first_count_it_comes_at_once_with_what_was_last_told(client: Client, world: SupplyFleet) -> None:
    client.force_login(make_manager())
    bare = client.get("/bench/backlog/").content.decode()
    assert "being counted in the background" in bare
    assert "modules are at the bench" not in bare
    with time_machine.travel(NOON - dt.timedelta(days=1), tick=False):
        count_today()
        bench_document()
    world.job(0, None)
    page = client.get("/bench/backlog/", headers={"HX-Request": "true"}).content.decode()
    assert page.lstrip().startswith("<section")
    assert f"What follows was told on {long_day(TODAY - dt.timedelta(days=1))}" in page
    assert "4\u00a0modules are at the bench" in page
    assert "as=csv" not in page
    look = {"HX-Request": "true", "HX-Trigger": "counting"}
    assert client.get("/bench/backlog/", headers=look).status_code == 204
    assert not KeptResult.objects.filter(made_at__gte=NOON).exists()
    run_here(Work.objects.get())
    told = client.get("/bench/backlog/", headers=look).content.decode()
    assert "5\u00a0modules are at the bench" in told
    assert "being counted" not in told


def test_the_bench_and_forecast_screens_bring_it_in(client: Client, world: SupplyFleet) -> None:
    client.force_login(make_manager())
    for address in ("/bench/", "/forecast/"):
        assert 'hx-get="/bench/backlog/"' in client.get(address).content.decode()
    part = client.get("/bench/backlog/", headers={"HX-Request": "true"}).content.decode()
    assert part.lstrip().startswith("<section")


def test_who_sees_every_depot_sees_it_and_others_are_told_why(client: Client, world: SupplyFleet) -> None:
    lock = Site.objects.get(code="LOCK")
    greta = make_bench(world.depot)
    count_today()
    client.force_login(greta)
    assert "modules are at the bench" in client.get("/bench/backlog/").content.decode()
    make_depot(code="OTHER-YARD")
    for person in (greta, make_planner(sites=[lock])):
        client.force_login(person)
        page = client.get("/bench/backlog/")
        assert page.status_code == 200
        assert "Ask somebody who sees all of them" in page.content.decode()
    for person in (make_crew(lock), make_contact(lock)):
        client.force_login(person)
        assert client.get("/bench/backlog/").status_code == 403


def test_a_book_without_hours_says_what_to_do(client: Client) -> None:
    client.force_login(make_manager())
    page = client.get("/bench/backlog/").content.decode()
    assert "Nobody has set how many hours the bench has" in page
    assert "/bench/hours/" in page


def test_modules_on_the_way_come_within_a_week(world: SupplyFleet) -> None:
    from fleet.models import Module, Visit

    before = bench_document()["modules"]["mean"][1]
    module = Module.objects.get(code="M-1")
    Visit.objects.create(code="V-SENT", module=module, site=Site.objects.get(code="WEIR"), happened_at=NOON,
                         happened_on=TODAY, known_on=TODAY, left="to bench")  # fmt: skip
    bench = bench_records(count_today()).bench
    assert bench is not None
    assert [kind.planned_a_week for kind in bench.kinds if kind.kind == COMING] == [1.0]
    assert bench_document()["modules"]["mean"][1] > before + 0.3
