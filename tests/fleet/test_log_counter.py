"""The question of a counter that seems to run backwards, on the log form and where the counter is read by itself."""

from __future__ import annotations

import datetime as dt

import pytest
import time_machine
from django.test import Client
from django.urls import reverse

from fleet.actions.entries import CounterEntry
from fleet.actions.record_reading import record_reading
from fleet.models import Reading, Visit
from tests.factories import Carriage
from tests.fleet.log_page import at, log_address, opened, send, written

pytestmark = pytest.mark.django_db
NOW = dt.datetime(2026, 3, 9, 14, 5, tzinfo=dt.UTC)
# The sentence is the design's own.
QUESTION = "Counter 48 210 is below the last reading 51 877 of 3 March 2026. Was the counter changed?"


def plain(text: str) -> str:
    return text.replace("\u202f", " ").replace("\u00a0", " ")


@pytest.fixture(autouse=True)
def _now():
    with time_machine.travel(NOW, tick=False):
        yield


@pytest.fixture
def weir() -> Carriage:
    carriage = Carriage(code="KM-1")
    carriage.fit(carriage.n1, "2026-01-10")
    read_at = dt.datetime(2026, 3, 3, 9, 0, tzinfo=dt.UTC)
    record_reading(
        by=carriage.crew, module=carriage.module, read_at=read_at, counter=CounterEntry(strokes=51_877, counter="A-1")
    )
    return carriage


@pytest.fixture
def cleo(weir: Carriage) -> Client:
    client = Client()
    client.force_login(weir.crew)
    return client


def test_a_lower_number_is_asked_about_and_nothing_is_stored(weir, cleo):
    nut = at(weir.nut, outcome="failed", mode=weir.worn, note="grit in the thread")
    answer = send(cleo, weir.module, nut, strokes="48 210", note="wet day")
    assert answer.status_code == 422
    assert plain(answer.context["sheet"].visit.question) == QUESTION
    page = answer.content.decode()
    assert plain(page).count(QUESTION) >= 1
    for kept in ('value="48 210"', "grit in the thread", "wet day", 'value="failed"'):
        assert kept in page
    for choice in ("a new counter", "rolled over", "set back to nought", "mistyped"):
        assert choice in page
    assert not Visit.objects.exists()
    assert Reading.objects.count() == 1


@pytest.mark.parametrize(
    ("answer", "counter", "restarts"),
    [("new counter", "B-2", ""), ("rolled over", "A-1", "rolled over"), ("reset", "A-1", "reset")],
)
def test_each_answer_is_kept_with_the_reading(weir, cleo, answer, counter, restarts):
    more = {"serial": "B-2"} if answer == "new counter" else {}
    assert send(cleo, weir.module, all_well="on", strokes="48210", restart=answer, **more).status_code == 302
    reading = Reading.objects.latest("read_at")
    assert (reading.strokes, reading.counter, reading.restarts) == (48_210, counter, restarts)


def test_a_new_counter_without_a_legible_number_is_named_after_the_day(weir, cleo):
    assert send(cleo, weir.module, all_well="on", strokes="12", restart="new counter").status_code == 302
    assert Reading.objects.latest("read_at").counter.startswith("NEW-20260309-")


def test_mistyped_and_the_same_number_again_is_asked_again(weir, cleo):
    assert send(cleo, weir.module, all_well="on", strokes="48210", restart="mistyped").status_code == 422
    assert send(cleo, weir.module, all_well="on", strokes="58210", restart="mistyped").status_code == 302
    assert Reading.objects.latest("read_at").counter == "A-1"


def test_an_answer_without_a_number_is_asked_for_the_number(weir, cleo):
    answer = send(cleo, weir.module, all_well="on", restart="rolled over")
    assert answer.status_code == 422
    assert "restart" in answer.context["sheet"].visit.errors


@pytest.mark.parametrize("typed", ["52 000", "52\u202f000", "52'000", " 52000 "])
def test_spaces_in_a_number_are_no_fault(weir, cleo, typed):
    assert send(cleo, weir.module, all_well="on", strokes=typed).status_code == 302
    assert Reading.objects.latest("read_at").strokes == 52_000


@pytest.mark.parametrize(
    "typed", ["52.000", "52,5", "-1", "1e9", "abc", "９９９９９", "9" * 30, "1" * 10_000, "5\x002"]
)
def test_what_is_no_whole_number_is_told_so(weir, cleo, typed):
    answer = send(cleo, weir.module, all_well="on", strokes=typed)
    assert answer.status_code == 422
    assert answer.context["sheet"].visit.errors["strokes"]
    assert Reading.objects.count() == 1


def reading_address(weir: Carriage) -> str:
    return reverse("read_counter", args=[weir.module.code])


def read(client: Client, weir: Carriage, **typed: str):
    form = client.get(reading_address(weir)).context["form"]
    data = {field.html_name: written(field.value()) for field in form if field.value() not in (None, "")}
    return client.post(reading_address(weir), data | typed)


def test_the_counter_is_read_by_itself(weir, cleo):
    assert read(cleo, weir, strokes="52 000", hours="310,5").status_code == 302
    reading = Reading.objects.latest("read_at")
    assert (reading.strokes, reading.hours, reading.visit) == (52_000, 310.5, None)
    assert not Visit.objects.exists()


def test_read_by_itself_asks_the_same_question(weir, cleo):
    answer = read(cleo, weir, strokes="48210")
    assert answer.status_code == 422
    assert plain(answer.context["form"].question) == QUESTION
    assert read(cleo, weir, strokes="48210", restart="rolled over").status_code == 302


def test_an_empty_reading_says_what_is_missing(weir, cleo):
    answer = read(cleo, weir)
    assert answer.status_code == 422
    assert "Nothing was read" in answer.content.decode()


def test_one_reading_sent_twice_is_recorded_once(weir, cleo):
    form = cleo.get(reading_address(weir)).context["form"]
    data = {field.html_name: written(field.value()) for field in form if field.value() not in (None, "")}
    for _ in range(2):
        assert cleo.post(reading_address(weir), data | {"strokes": "60000"}).status_code == 302
    assert Reading.objects.count() == 2


def test_contacts_do_not_read_counters(weir, client):
    client.force_login(weir.contact)
    assert client.get(reading_address(weir)).status_code == 403
    assert client.post(log_address(weir.module), {}).status_code == 403


def test_the_last_reading_stands_beside_the_field(weir, cleo):
    assert "Last reading 51 877 on 3 Mar." in plain(cleo.get(log_address(weir.module)).content.decode())
    assert opened(cleo, weir.module)["left"] == "running"


def test_a_counter_far_ahead_of_its_pace_is_asked_about_and_stored_only_when_confirmed(weir, cleo):
    for day, strokes in ((4, 52_500), (5, 53_100), (6, 53_700), (7, 54_300), (8, 54_900)):
        read_at = dt.datetime(2026, 3, day, 9, 0, tzinfo=dt.UTC)
        record_reading(by=weir.crew, module=weir.module, read_at=read_at, counter=CounterEntry(strokes=strokes))
    weeks = dt.datetime(2026, 2, 20, 9, 0, tzinfo=dt.UTC)
    record_reading(by=weir.crew, module=weir.module, read_at=weeks, counter=CounterEntry(strokes=45_000, counter="A-1"))
    assert send(cleo, weir.module, all_well="on", strokes="60 000").status_code == 302  # a hard week
    asked = send(cleo, weir.module, all_well="on", strokes="601 000")
    assert asked.status_code == 422
    assert "Is a digit too many?" in asked.content.decode()
    assert "The counter really shows this" in asked.content.decode()
    assert Reading.objects.filter(strokes=601_000).count() == 0
    alone = cleo.get(reverse("read_counter", args=["KM-1"])).context["form"]
    said = {field.html_name: written(field.value()) for field in alone if field.value() not in (None, "", False)}
    assert cleo.post(reverse("read_counter", args=["KM-1"]), said | {"strokes": "601 000"}).status_code == 422
    assert send(cleo, weir.module, all_well="on", strokes="601 000", really="on").status_code == 302
    assert Reading.objects.filter(strokes=601_000).count() == 1
