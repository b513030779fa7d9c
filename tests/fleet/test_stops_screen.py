"""Cast: Cora, a contact of the weir, sees that a module stands still; Cleo of the crew has it running again."""

from __future__ import annotations

import datetime as dt

import pytest
import time_machine
from django.test import Client
from django.urls import reverse

from fleet.models import Stop
from tests.factories import Carriage, make_contact, make_site
from tests.fleet.log_page import written

pytestmark = pytest.mark.django_db
NOW = dt.datetime(2026, 3, 9, 14, 5, tzinfo=dt.UTC)


@pytest.fixture(autouse=True)
def _now():
    with time_machine.travel(NOW, tick=False):
        yield


@pytest.fixture
def weir() -> Carriage:
    return Carriage(code="KM-1")


def address(name: str = "report_stop") -> str:
    return reverse(name, args=["KM-1"])


def signed_in(person) -> Client:
    client = Client()
    client.force_login(person)
    return client


def filled(client: Client, **typed: str) -> dict[str, str]:
    form = client.get(address()).context["form"]
    return {field.html_name: written(field.value()) for field in form if field.value() not in (None, "")} | typed


def test_a_contact_reports_a_stop_in_the_sites_own_time(weir):
    weir.site.zone = "Europe/Madrid"
    weir.site.save()
    cora = signed_in(weir.contact)
    data = filled(cora, note="motor hums", time="11:30")
    assert cora.post(address(), data).url == "/m/KM-1"
    assert cora.post(address(), data).url == "/m/KM-1"  # tapped twice
    stop = Stop.objects.get()
    assert stop.stopped_at == dt.datetime(2026, 3, 9, 10, 30, tzinfo=dt.UTC)
    assert (stop.reported_by, stop.note, stop.site) == (weir.contact, "motor hums", weir.site)


def test_a_stop_on_record_is_told_not_asked_for_again(weir):
    cora = signed_in(weir.contact)
    data = filled(cora)
    cora.post(address(), data)
    page = cora.get(address()).content.decode()
    assert "You need not report it again" in page
    other = signed_in(weir.crew).post(address(), {**data, "entry_key": "5c0e6a5e-43b8-4d0b-9c95-000000000001"})
    assert other.status_code == 422
    assert "on record" in other.content.decode()
    assert Stop.objects.count() == 1


def test_the_crew_says_that_it_runs_again_and_contacts_do_not(weir):
    cora, cleo = signed_in(weir.contact), signed_in(weir.crew)
    cora.post(address(), filled(cora, time="09:00"))
    running = {"day": "2026-03-09", "time": "13:00"}
    assert cora.post(address("end_stop"), running).status_code == 403
    assert cleo.get(address("end_stop")).status_code == 405
    early = cleo.post(address("end_stop"), {**running, "time": "08:00"})
    assert early.status_code == 422
    assert early.context["running"].errors["time"]
    assert cleo.post(address("end_stop"), running).status_code == 302
    assert Stop.objects.get().running_at == dt.datetime(2026, 3, 9, 13, 0, tzinfo=dt.UTC)
    again = cleo.post(address("end_stop"), running, follow=True)
    assert "does not stand still on record" in again.content.decode()


def test_a_contact_of_another_site_does_not_see_the_module(weir):
    stranger = signed_in(make_contact(make_site()))
    assert stranger.get(address()).status_code == 404
    assert stranger.post(address(), {"day": "2026-03-09", "time": "09:00"}).status_code == 404


@pytest.mark.parametrize(
    ("field", "typed"),
    [
        ("day", "2026-03-10"),
        ("day", ""),
        ("time", "99:99"),
        ("time", "14:30"),
        ("note", "n" * 10_000),
        ("note", "\x00"),
        ("entry_key", "k"),
    ],
)
def test_what_does_not_fit_is_told_beside_the_field(weir, field, typed):
    cora = signed_in(weir.contact)
    answer = cora.post(address(), filled(cora, **{field: typed}))
    assert answer.status_code == 422
    assert answer.context["form"].errors[field]
    assert not Stop.objects.exists()


def test_an_hour_that_does_not_exist(weir):
    """Portugal put its clocks on at 01:00 on 30 March 2025 (tz database)."""
    cora = signed_in(weir.contact)
    answer = cora.post(address(), filled(cora, day="2025-03-30", time="01:15"))
    assert "did not exist" in answer.context["form"].errors["time"][0]
