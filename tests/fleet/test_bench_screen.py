"""The bench on screen: Greta works there, Rosa sends a module, Otto sets the hours."""

from __future__ import annotations

from typing import Any

import pytest
from django.test import Client
from django.urls import reverse

from fleet.actions.entries import FindingEntry
from fleet.actions.record_visit import record_visit
from fleet.actions.take_in_module import take_in_module
from fleet.models import BenchCapacity, BenchHours, BenchJob, Fitting, Person, Site, StockMove
from fleet.module_page import ModulePage
from fleet.module_past import job_words
from fleet.rights import seen_by
from tests.factories import Carriage, at, make_bench, make_depot, make_planner, make_store, on, stock
from tests.fleet.invariants import broken_rules
from tests.fleet.invariants_stock import broken_stock_rules

pytestmark = pytest.mark.django_db


@pytest.fixture
def weir() -> Carriage:
    carriage = Carriage()
    carriage.fit(carriage.n1, "2024-01-10")
    return carriage


@pytest.fixture
def depot() -> Site:
    return make_depot(code="YARD", name="The yard")


@pytest.fixture
def greta(depot: Site) -> Person:
    return make_bench(depot, name="Greta")


@pytest.fixture
def otto() -> Person:
    return make_planner(name="Otto")


def client_of(person: Person) -> Client:
    client = Client()
    client.force_login(person)
    return client


def send(weir: Carriage, day: str = "2024-03-09") -> None:
    record_visit(by=weir.crew, module=weir.module, happened_at=at(day), left="to bench", note="screw bowed")


@pytest.fixture
def job(weir: Carriage, greta: Person, depot: Site) -> BenchJob:
    send(weir)
    return take_in_module(by=greta, module=weir.module, depot=depot, received_on=on("2024-03-11"), code="J-1")


def text(reply: Any) -> str:
    body = b"".join(reply.streaming_content) if reply.streaming else reply.content
    return str(body.decode())


def opened(client: Client, name: str) -> dict[str, Any]:
    form = client.get("/bench/jobs/J-1/").context["forms"][name]
    values = {field.html_name: field.value() for field in form}
    return {key: value for key, value in values.items() if value not in (None, "", False)}


def fill(client: Client, name: str, address: str, **said: Any) -> Any:
    data = opened(client, name) | {f"{name}-{key}": value for key, value in said.items()}
    return client.post(reverse(address, args=["J-1"]), data)


def test_an_empty_bench_says_so(greta: Person) -> None:
    page = text(client_of(greta).get("/bench/"))
    assert "Nothing is on the bench; the pool is empty." in page
    assert "nobody has set how many there are" in page
    assert "No module was taken in yet." in text(client_of(greta).get("/bench/jobs/"))


def test_what_is_on_the_way_is_taken_in(weir: Carriage, greta: Person, depot: Site) -> None:
    send(weir)
    client = client_of(greta)
    page = text(client.get("/bench/"))
    assert weir.module.code in page
    assert "screw bowed" not in page  # the note belongs to a site that she does not see
    assert weir.site.code not in page
    form = client.get(f"/bench/take-in/?module={weir.module.code}").context["form"]
    data = {field.html_name: field.value() for field in form if field.value() not in (None, "")}
    assert data["module"] == str(weir.module.pk)
    reply = client.post("/bench/take-in/", data | {"reason": "screw bowed"})
    job = BenchJob.objects.get()
    assert reply["Location"] == f"/bench/jobs/{job.code}/"
    assert client.post("/bench/take-in/", data | {"entry_key": "no key"}).status_code == 422
    assert broken_rules() == []


def test_why_it_comes_is_written_down_beforehand(weir: Carriage, greta: Person, depot: Site) -> None:
    found = FindingEntry(position=weir.nut, finding="failed", mode=weir.worn)
    record_visit(by=weir.crew, module=weir.module, happened_at=at("2024-03-09"), left="to bench", findings=[found])
    client = client_of(greta)
    why = f"{weir.nuts.title}: thread worn out"
    assert why in text(client.get("/bench/"))
    assert client.get(f"/bench/take-in/?module={weir.module.code}").context["form"]["reason"].value() == why
    assert client.get("/bench/take-in/?module=NONE").context["form"]["reason"].value() == ""


def test_a_job_lives_through_its_page(job: BenchJob, weir: Carriage, greta: Person, depot: Site) -> None:
    client, shelf = client_of(greta), make_store(site=depot)
    stock(shelf, weir.n2, 1)
    assert fill(client, "stage", "move_job", stage="waiting for parts", waits_for=weir.n2.pk).status_code == 302
    assert f"waits for {weir.n2.code}" in text(client.get("/bench/"))
    assert fill(client, "stage", "move_job", stage="on the bench").status_code == 302
    assert fill(client, "hours", "book_hours", hours="2.5").status_code == 302
    said = {"position": weir.nut.pk, "reason": "failed", "mode": weir.worn.pk, "part": weir.n2.pk, "store": shelf.pk}
    assert fill(client, "change", "change_on_bench", **said).status_code == 302
    assert Fitting.objects.running().get(position=weir.nut).part == weir.n2
    assert StockMove.objects.get(kind="issue").job == job
    page = text(client.get("/bench/jobs/J-1/"))
    assert f"{weir.n1.code} out" in page
    assert f"{weir.n2.code} in" in page
    assert "2.5" in page
    assert fill(client, "finish", "finish_job", outcome="ready").status_code == 302
    job.refresh_from_db()
    assert job.outcome == "ready"
    done = text(client.get("/bench/jobs/J-1/"))
    assert "as ready, after" in done
    assert "Move it" not in done
    assert "is ready in the pool" in text(client.get("/bench/"))
    assert broken_rules() == broken_stock_rules() == []


def test_of_two_at_the_bench_who_enter_the_same_change_the_second_is_told(
    job: BenchJob, weir: Carriage, greta: Person, otto: Person
) -> None:
    said = {"change-position": weir.nut.pk, "change-reason": "failed", "change-part": weir.n2.pk}
    pages = [client_of(person).get("/bench/jobs/J-1/").context["forms"]["change"] for person in (greta, otto)]
    sheets = [{field.html_name: field.value() or "" for field in form} | said for form in pages]
    address = reverse("change_on_bench", args=["J-1"])
    assert client_of(greta).post(address, sheets[0]).status_code == 302
    told = client_of(otto).post(address, sheets[1])
    assert told.status_code == 422
    assert "Greta logged a change here" in text(told)
    assert Fitting.objects.count() == 2
    holds = told.context["forms"]["change"]["holds"].value()
    assert client_of(otto).post(address, sheets[1] | {"change-holds": holds}).status_code == 302
    assert Fitting.objects.count() == 3
    assert broken_rules() == []


def test_refusals_stand_where_the_hand_is(job: BenchJob, weir: Carriage, greta: Person, depot: Site) -> None:
    client, shelf = client_of(greta), make_store(site=depot, name="Yard shelf")
    reply = fill(client, "hours", "book_hours", hours="30")
    assert reply.status_code == 422
    assert reply.context["forms"]["hours"].errors["hours"]
    assert not reply.context["forms"]["change"].errors
    said = {"position": weir.nut.pk, "reason": "failed", "part": weir.n2.pk, "store": shelf.pk}
    reply = fill(client, "change", "change_on_bench", **said)
    assert "Yard shelf holds none of" in text(reply)
    assert fill(client, "finish", "finish_job", outcome="scrapped").context["forms"]["finish"].errors["sure"]
    assert fill(client, "finish", "finish_job", outcome="mended").status_code == 422
    reply = fill(client, "change", "change_on_bench", position=weir.screw.pk)
    assert "Say what was done" in text(reply)
    assert Fitting.objects.count() == 1
    assert not BenchHours.objects.exists()


def test_a_part_without_a_position_is_used(job: BenchJob, weir: Carriage, greta: Person, depot: Site) -> None:
    shelf = make_store(site=depot)
    stock(shelf, weir.s1, 3)
    assert fill(client_of(greta), "use", "use_on_bench", part=weir.s1.pk, store=shelf.pk, quantity=2).status_code == 302
    assert StockMove.objects.get(kind="issue").quantity == -2


def test_two_at_one_job_are_told(job: BenchJob, greta: Person) -> None:
    client = client_of(greta)
    before = opened(client, "stage")
    fill(client, "stage", "move_job", stage="waiting")
    reply = client.post("/bench/jobs/J-1/stage/", before | {"stage-stage": "on the bench"})
    assert reply.status_code == 422
    assert "changed" in text(reply)


def test_hours_are_corrected_and_struck_out(job: BenchJob, greta: Person, otto: Person) -> None:
    client = client_of(greta)
    fill(client, "hours", "book_hours", hours="2")
    row = BenchHours.objects.get()
    correct = reverse("correct_record", args=["hours", row.pk])
    data = {"version": 1, "day": row.day.isoformat(), "hours": "3", "reason": "mistyped"}
    assert client.post(correct, data)["Location"] == "/bench/jobs/J-1/"
    strike = reverse("strike_out_record", args=["hours", row.pk])
    assert client.post(strike, {"version": 2, "reason": "other job"}).status_code == 302
    row.refresh_from_db()
    assert (row.hours, row.struck_out) == (3, "other job")
    job.refresh_from_db()
    fix = {"version": job.version, "received_on": "2024-03-12", "reason": "label"}
    assert client_of(otto).post(reverse("correct_record", args=["job", job.pk]), fix).status_code == 302
    job.refresh_from_db()
    assert job.received_on == on("2024-03-12")


def test_hours_of_the_bench_are_set_by_the_office(greta: Person, otto: Person) -> None:
    assert client_of(greta).get("/bench/hours/").status_code == 403
    client = client_of(otto)
    data = {
        "first_week": "2026-12-14",
        "last_week": "2026-12-28",
        "hours": "40",
        "closed_days": "2026-12-24, 2026-12-25",
    }
    assert client.post("/bench/hours/", data).status_code == 302
    assert list(BenchCapacity.objects.values_list("hours", flat=True)) == [40, 24, 40]
    assert client.post("/bench/hours/", data | {"closed_days": "Christmas"}).status_code == 422
    assert client.post("/bench/hours/", data | {"last_week": "2026-01-01"}).status_code == 422


def test_lists_filter_and_go_out_as_a_file(job: BenchJob, weir: Carriage, greta: Person) -> None:
    client = client_of(greta)
    assert "J-1" in text(client.get(f"/bench/jobs/?module={weir.module.code}&stage=received"))
    assert "No jobs match these filters." in text(client.get("/bench/jobs/?stage=finished"))
    assert f"J-1,{weir.module.code},YARD" in text(client.get("/bench/jobs/?as=csv"))


def test_the_bench_is_not_for_crews_and_contacts(job: BenchJob, weir: Carriage) -> None:
    for person in (weir.crew, weir.contact):
        for address in ("/bench/", "/bench/jobs/", "/bench/jobs/J-1/", "/bench/take-in/"):
            assert client_of(person).get(address).status_code == 403, address
    other = client_of(make_bench(make_depot()))
    assert other.get("/bench/jobs/J-1/").status_code == 404
    assert other.post("/bench/jobs/J-1/finish/").status_code == 404


def test_a_modules_life_lines_show_its_stay_at_the_bench(job: BenchJob, weir: Carriage, otto: Person) -> None:

    page = ModulePage(lambda model: seen_by(otto, model), otto, weir.module)
    shades = [shade.words for shade in page.life_history().shades if shade.kind == "away"]
    assert any(f"on the bench {job_words(job)}" in words for words in shades)
