"""Whatever is typed, the form comes back with an error in words beside the field, and nothing is stored."""

from __future__ import annotations

import datetime as dt
import uuid
from zoneinfo import ZoneInfo

import pytest
import time_machine
from django.core.exceptions import ValidationError
from django.test import Client
from django.urls import reverse

from fleet.forms.instants import instant_of
from fleet.models import Fitting, Reading, Visit
from tests.factories import Carriage, make_mode, make_part
from tests.fleet.log_page import at, log_address, opened, send

pytestmark = pytest.mark.django_db
NOW = dt.datetime(2026, 4, 9, 14, 5, tzinfo=dt.UTC)
LISBON = ZoneInfo("Europe/Lisbon")


@pytest.fixture(autouse=True)
def _now():
    with time_machine.travel(NOW, tick=False):
        yield


@pytest.fixture
def weir() -> Carriage:
    carriage = Carriage(code="KM-1")
    carriage.fit(carriage.n1, "2026-01-10")
    return carriage


@pytest.fixture
def cleo(weir: Carriage) -> Client:
    client = Client()
    client.force_login(weir.crew)
    return client


def refused(answer, form: str, field: str) -> list[str]:
    assert answer.status_code == 422
    sheet = answer.context["sheet"]
    told = sheet.visit if form == "visit" else next(each for each in sheet.positions if each.name == form)
    assert field in told.errors, dict(told.errors)
    assert not Visit.objects.exists()
    assert not Reading.objects.exists()
    assert Fitting.objects.count() == 1
    return list(told.errors[field])


@pytest.mark.parametrize(
    ("field", "typed"),
    [
        ("day", ""),
        ("day", "2026-02-30"),
        ("day", "yesterday"),
        ("day", "2026-04-10"),
        ("day", "9999-12-31"),
        ("day", "0001-01-01"),
        ("day", "2026-04-09\x00"),
        ("day", "7" * 10_000),
        ("time", ""),
        ("time", "25:00"),
        ("time", "noon"),
        ("time", "23:59"),
        ("left", "floating"),
        ("left", ""),
        ("left", "run\x00ning"),
        ("hours", "12h"),
        ("hours", "1e400"),
        ("hours", "nan"),
        ("hours", "99999999"),
        ("restart", "perhaps"),
        ("serial", "s" * 61),
        ("serial", "\x00"),
        ("note", "n" * 10_000),
        ("note", "a\x00b"),
        ("stood_day", "2026-04-31"),
        ("stood_time", "7 o'clock"),
        ("entry_key", "not a key"),
        ("entry_key", ""),
    ],
)
def test_of_the_visit(weir, cleo, field, typed):
    told = refused(send(cleo, weir.module, all_well="on", **{field: typed}), "visit", field)
    assert all(len(sentence) < 300 and "\x00" not in sentence for sentence in told)


@pytest.mark.parametrize(
    ("field", "typed"),
    [
        ("outcome", "exploded"),
        ("outcome", "x" * 10_000),
        ("outcome", "fitted"),
        ("mode", "0"),
        ("mode", "-1"),
        ("mode", "9" * 40),
        ("part", "abc"),
        ("part", "\x00"),
        ("cause", "12345678"),
        ("failed_on", "2026-04-10"),
        ("failed_on", "2025-12-31"),
        ("failed_on", "soon"),
        ("last_good_on", "2026-01-01"),
        ("last_good_on", "2026-13-01"),
        ("found_by", "a friend"),
        ("serial", "s" * 61),
        ("lot", "l\x00t"),
        ("age_at_fit", "-1"),
        ("age_at_fit", "inf"),
        ("age_at_fit", "old"),
        ("play", "1001"),
        ("play", "nan"),
        ("note", "n" * 4_001),
    ],
)
def test_of_a_position(weir, cleo, field, typed):
    fields = {"outcome": "failed", "mode": weir.worn, field: typed}
    refused(send(cleo, weir.module, at(weir.nut, **fields)), weir.nuts.title, field)


def test_a_mode_and_a_part_of_another_component_are_no_choices(weir, cleo):
    strange = {"mode": make_mode(), "part": make_part()}
    answer = send(cleo, weir.module, at(weir.nut, outcome="failed", **strange))
    refused(answer, weir.nuts.title, "mode")
    refused(answer, weir.nuts.title, "part")


def test_last_good_after_the_failure(weir, cleo):
    days = {"failed_on": "2026-03-01", "last_good_on": "2026-03-02"}
    refused(send(cleo, weir.module, at(weir.nut, outcome="failed", **days)), weir.nuts.title, "last_good_on")


def test_a_failure_after_the_visit(weir, cleo):
    answer = send(cleo, weir.module, at(weir.nut, outcome="failed", failed_on="2026-04-02"), day="2026-04-01")
    refused(answer, weir.nuts.title, "failed_on")


def test_a_visit_before_the_part_went_in(weir, cleo):
    answer = send(cleo, weir.module, at(weir.nut, outcome="failed"), day="2026-01-05")
    refused(answer, weir.nuts.title, "outcome")


def test_a_stop_that_began_after_the_visit(weir, cleo):
    answer = send(cleo, weir.module, all_well="on", day="2026-04-01", time="08:00", stood_day="2026-04-02")
    refused(answer, "visit", "stood_day")


def test_an_hour_that_the_clock_change_leaves_out(weir, cleo):
    """Portugal put its clocks on at 01:00 on 29 March 2026 (tz database)."""
    told = refused(send(cleo, weir.module, all_well="on", day="2026-03-29", time="01:30"), "visit", "time")
    assert "went from 01:00 to 02:00" in told[0]
    assert send(cleo, weir.module, all_well="on", day="2026-03-29", time="02:00").status_code == 302
    assert Visit.objects.get().happened_at == dt.datetime(2026, 3, 29, 1, 0, tzinfo=dt.UTC)


def test_a_doubled_hour_means_its_first_run():
    """Portugal put its clocks back at 02:00 on 26 October 2025 (tz database)."""
    assert instant_of(dt.date(2025, 10, 26), dt.time(1, 30), LISBON) == dt.datetime(2025, 10, 26, 0, 30, tzinfo=dt.UTC)


def test_a_day_that_a_place_skipped_whole():
    """Samoa left out 30 December 2011 (tz database)."""
    with pytest.raises(ValidationError, match="did not exist on 30"):
        instant_of(dt.date(2011, 12, 30), dt.time(12, 0), ZoneInfo("Pacific/Apia"))


def test_an_empty_form_asks_for_something(weir, cleo):
    answer = send(cleo, weir.module)
    assert answer.status_code == 422
    assert "Nothing is said yet" in answer.content.decode()
    assert cleo.post(log_address(weir.module), {}).status_code == 422
    assert not Visit.objects.exists()


def test_all_well_and_a_failure_contradict_each_other(weir, cleo):
    refused(send(cleo, weir.module, at(weir.nut, outcome="failed"), all_well="on"), "visit", "all_well")


def test_no_spare_without_a_failure(weir, cleo):
    assert send(cleo, weir.module, at(weir.nut, outcome="cleaned"), finish="no spare").status_code == 422
    assert not Visit.objects.exists()


def test_a_note_without_saying_what_happened(weir, cleo):
    refused(send(cleo, weir.module, at(weir.nut, note="squeaks"), all_well="on"), weir.nuts.title, "outcome")


def test_fields_of_another_outcome_are_passed_over(weir, cleo):
    """A phone may still hold what was typed before the outcome was changed."""
    left_over = {"mode": weir.worn, "failed_on": "2026-03-01", "found_by": "test", "because": "age"}
    assert send(cleo, weir.module, at(weir.nut, outcome="upgrade", **left_over)).status_code == 302
    out = Fitting.objects.get(reason="upgrade")
    assert (out.mode, out.failed_on, out.found_by) == (None, None, "")


def test_everything_typed_comes_back_with_the_key(weir, cleo):
    data = opened(cleo, weir.module) | at(weir.nut, outcome="failed", mode=weir.worn, lot="L-77", part=weir.n1)
    data |= {"day": "2026-04-40", "note": "<b>bald</b> brush", "strokes": "77", "finish": "done"}
    page = cleo.post(log_address(weir.module), data).content.decode()
    for kept in (data["entry_key"], "L-77", "2026-04-40", "&lt;b&gt;bald&lt;/b&gt; brush", 'value="77"'):
        assert kept in page
    assert f'<option value="{weir.n1.pk}" selected>' in page


def test_a_broken_key_is_replaced_so_that_the_next_try_works(weir, cleo):
    answer = send(cleo, weir.module, all_well="on", entry_key="zzz")
    fresh = answer.context["sheet"].visit["entry_key"].value()
    assert uuid.UUID(fresh)


@pytest.mark.parametrize("tag", ["km-1", "KM-1"])
def test_a_tag_is_found_however_it_is_spelt(weir, cleo, tag):
    assert cleo.get(f"/m/{tag}/log").status_code == 200


@pytest.mark.parametrize("tag", ["KM-2", "%00", "K%2FM", "x" * 500, "é", "KM 1"])
def test_what_is_no_tag_is_not_there(weir, cleo, tag):
    assert cleo.get(f"/m/{tag}/log").status_code == 404


def test_the_search_for_a_module_bears_anything(weir, cleo):
    for words in ["", "km", "weir", "1", "\x00", "%", "_", "'", "x" * 10_000, "é ü ß", "a b c d e f g h"]:
        answer = cleo.get(reverse("log"), {"q": words})
        assert answer.status_code == 200
    assert "KM-1" in cleo.get(reverse("log"), {"q": "m-1"}).content.decode()
    assert "KM-1" in cleo.get(reverse("log"), {"q": f"{weir.site.code.lower()} km"}).content.decode()
    assert "KM-1" not in cleo.get(reverse("log"), {"q": "%"}).content.decode()


def test_the_same_design_again_is_no_upgrade(weir, cleo):
    answer = send(cleo, weir.module, at(weir.nut, outcome="upgrade", part=weir.n1), strokes="60000")
    assert answer.status_code == 422
    assert "that is no upgrade" in answer.content.decode()
    assert send(cleo, weir.module, at(weir.nut, outcome="upgrade", part=weir.n2), strokes="60000").status_code == 302
