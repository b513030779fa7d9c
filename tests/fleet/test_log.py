"""Cast: Cleo is crew at the weir, where one carriage with a nut and a screw stands."""

from __future__ import annotations

import datetime as dt
import uuid

import pytest
import time_machine
from django.test import Client
from django.urls import reverse

from fleet.models import Finding, Fitting, Reading, Stop, Visit
from tests.factories import Carriage, make_crew, make_part, make_site
from tests.fleet.log_page import at, log_address, opened, send

pytestmark = pytest.mark.django_db
NOW = dt.datetime(2026, 3, 9, 14, 5, tzinfo=dt.UTC)


@pytest.fixture(autouse=True)
def _now():
    with time_machine.travel(NOW, tick=False):
        yield


@pytest.fixture
def weir() -> Carriage:
    carriage = Carriage(code="KM-1")
    carriage.fit(carriage.n1, "2026-01-10")
    carriage.fit(carriage.s1, "2026-01-10")
    return carriage


@pytest.fixture
def cleo(weir: Carriage) -> Client:
    client = Client()
    client.force_login(weir.crew)
    return client


def test_a_nut_change_becomes_visit_removal_fitting_and_reading(weir, cleo):
    answer = send(cleo, weir.module, at(weir.nut, outcome="failed", mode=weir.worn), strokes="48 210")
    assert answer.status_code == 302
    assert answer.url == reverse("module", args=["KM-1"])
    visit = Visit.objects.get()
    assert (visit.crew, visit.entered_by, visit.left, visit.happened_at) == (weir.crew, weir.crew, "running", NOW)
    out = Fitting.objects.get(removed_visit=visit)
    assert (out.part, out.reason, out.mode, out.removed_on) == (weir.n1, "failed", weir.worn, dt.date(2026, 3, 9))
    went = Fitting.objects.get(fitted_visit=visit)
    assert went.part == weir.n2  # the current design, preselected
    assert went.strokes_at_fit == out.strokes_at_removal is not None
    assert Reading.objects.get().strokes == 48_210
    assert visit.history.get().source == "browser"


def test_the_current_design_that_fits_is_preselected_else_the_part_last_used(weir, cleo):
    def likely() -> str:
        return opened(cleo, weir.module)[f"p{weir.nut.pk}-part"]

    assert likely() == str(weir.n2.pk)
    other_type = Carriage(site=weir.site).type
    make_part(component=weir.nuts, supersedes=weir.n2, fits_types=[other_type])
    assert likely() == str(weir.n2.pk)  # its successor does not fit here
    for part in (weir.n1, weir.n2):
        part.state = "ended"
        part.save()
    assert likely() == str(weir.n1.pk)  # what sits there now
    with time_machine.travel(NOW - dt.timedelta(days=2), tick=False):
        send(cleo, weir.module, at(weir.nut, outcome="failed", part=weir.n2, mode=weir.worn))
    assert likely() == str(weir.n2.pk)


def test_the_same_entry_sent_twice_is_recorded_once_and_answered_the_same(weir, cleo):
    data = opened(cleo, weir.module) | at(weir.nut, outcome="failed", mode=weir.worn) | {"finish": "done"}
    data |= {"strokes": "900", "restart": "new counter"}
    first = cleo.post(log_address(weir.module), data)
    second = cleo.post(log_address(weir.module), data)
    assert (first.status_code, first.url) == (second.status_code, second.url) == (302, "/m/KM-1")
    assert Visit.objects.count() == 1
    assert Fitting.objects.filter(position=weir.nut).count() == 2
    with time_machine.travel(NOW + dt.timedelta(minutes=4), tick=False):
        late = cleo.post(log_address(weir.module), data, follow=True)
    assert "recorded already" in late.content.decode()
    assert Visit.objects.count() == 1


@pytest.mark.parametrize("said", [{"part": ""}, {"outcome": "upgrade", "part": "N2"}])
def test_sent_twice_it_is_answered_the_same_though_the_position_changed_by_it(weir, cleo, said):
    """What was left empty has no part to fail any more; what was upgraded cannot be upgraded to the same design."""
    said = {"outcome": "failed", "mode": weir.worn, **said} | ({"part": weir.n2} if said["part"] else {})
    data = opened(cleo, weir.module) | at(weir.nut, **said) | {"finish": "done"}
    assert [cleo.post(log_address(weir.module), data).status_code for _ in range(2)] == [302, 302]
    assert "recorded already" in cleo.post(log_address(weir.module), data, follow=True).content.decode()
    assert Visit.objects.count() == 1
    other = opened(cleo, weir.module) | at(weir.nut, outcome="no such") | {"finish": "done"}
    assert cleo.post(log_address(weir.module), other).status_code == 422


def test_of_two_who_log_the_same_change_the_second_is_told(weir, cleo):
    """Else the part that the first put in would have failed on the day it went in."""
    tom = Client()
    tom.force_login(make_crew(weir.site, name="Tom"))
    failed = at(weir.nut, outcome="failed", mode=weir.worn, part=weir.n2) | {"finish": "done"}
    sheets = [opened(client, weir.module) | failed for client in (tom, cleo)]
    assert tom.post(log_address(weir.module), sheets[0]).status_code == 302
    told = cleo.post(log_address(weir.module), sheets[1])
    assert told.status_code == 422
    assert "Tom logged a change here" in told.content.decode()
    assert f"{weir.n2.code} is in now" in told.content.decode()
    assert Fitting.objects.filter(position=weir.nut).count() == 2
    [nut] = [form for form in told.context["sheet"].positions if form.position == weir.nut]
    again = sheets[1] | {nut["holds"].html_name: nut["holds"].value()}
    sent = cleo.post(log_address(weir.module), again)
    assert sent.status_code == 302, sent.context["sheet"].faults
    assert Fitting.objects.filter(position=weir.nut).count() == 3


def test_another_entry_under_a_used_key_is_refused_not_swallowed(weir, cleo):
    data = opened(cleo, weir.module) | {"all_well": "on", "finish": "done"}
    cleo.post(log_address(weir.module), data)
    answer = cleo.post(log_address(weir.module), data | {"note": "and the brush is bald"})
    assert answer.status_code == 422
    assert Visit.objects.count() == 1


def test_all_well_is_a_visit_without_changes(weir, cleo):
    assert send(cleo, weir.module, all_well="on", strokes="4000").status_code == 302
    assert Visit.objects.get().left == "running"
    assert not Finding.objects.exists()
    assert Fitting.objects.count() == 2


@pytest.mark.parametrize("finding", ["adjusted", "cleaned", "nothing found"])
def test_mended_without_a_part_is_a_finding(weir, cleo, finding):
    assert send(cleo, weir.module, at(weir.nut, outcome=finding, note="free again")).status_code == 302
    found = Finding.objects.get()
    assert (found.position, found.finding, found.mode, found.note) == (weir.nut, finding, None, "free again")


def test_no_spare_leaves_the_position_empty_and_the_module_stopped(weir, cleo):
    send(cleo, weir.module, at(weir.nut, outcome="failed", mode=weir.worn), finish="no spare")
    visit, stop = Visit.objects.get(), Stop.objects.get()
    assert (visit.left, stop.stopped_at, stop.running_at) == ("stopped", NOW, None)
    assert not Fitting.objects.running().filter(position=weir.nut).exists()
    page = cleo.get(log_address(weir.module))
    assert "Stands still since" in page.content.decode()
    with time_machine.travel(NOW + dt.timedelta(days=1), tick=False):
        assert send(cleo, weir.module, at(weir.nut, outcome="fitted")).status_code == 302
    assert Fitting.objects.running().get(position=weir.nut).part == weir.n2
    assert Stop.objects.get().running_at == NOW + dt.timedelta(days=1)


def test_a_part_found_failed_and_left_in_fails_on_the_day_it_was_found(weir, cleo):
    send(cleo, weir.module, at(weir.nut, outcome="failed in place", mode=weir.worn), left="stopped")
    found = Finding.objects.get()
    assert (found.finding, found.mode) == ("failed", weir.worn)
    with time_machine.travel(NOW + dt.timedelta(days=3), tick=False):
        assert opened(cleo, weir.module)[f"p{weir.nut.pk}-failed_on"] == "2026-03-09"
        send(cleo, weir.module, at(weir.nut, outcome="failed", mode=weir.worn))
    out = Fitting.objects.get(position=weir.nut, reason="failed")
    assert (out.failed_on, out.removed_on) == (dt.date(2026, 3, 9), dt.date(2026, 3, 12))


def test_several_positions_with_their_cause(weir, cleo):
    screw = at(weir.screw, outcome="failed", mode=weir.bowed)
    answer = send(cleo, weir.module, at(weir.nut, outcome="taken with another", cause=weir.screw), screw)
    assert answer.status_code == 302
    nut = Fitting.objects.get(position=weir.nut, reason="taken with another")
    assert nut.caused_by == Fitting.objects.get(position=weir.screw, reason="failed")
    assert Visit.objects.count() == 1


def test_a_cause_where_nothing_came_out_is_asked_about(weir, cleo):
    answer = send(cleo, weir.module, at(weir.nut, outcome="taken with another", cause=weir.screw))
    assert answer.status_code == 422
    assert "came out in this visit" in answer.context["sheet"].faults[0]
    assert not Visit.objects.exists()


@pytest.mark.parametrize(("because", "reason"), [("age", "planned"), ("worn", "worn to limit")])
def test_planned_asks_by_age_or_because_it_looked_worn(weir, cleo, because, reason):
    assert send(cleo, weir.module, at(weir.nut, outcome="planned")).status_code == 422
    assert not Visit.objects.exists()
    send(cleo, weir.module, at(weir.nut, outcome="planned", because=because))
    assert Fitting.objects.get(removed_on__isnull=False).reason == reason


def test_the_details_go_with_the_parts_they_belong_to(weir, cleo):
    details = {"serial": "A-7", "lot": "L-2", "age_at_fit": "1200", "found_by": "by chance", "play": "1.5"}
    days = {"failed_on": "2026-03-07", "last_good_on": "2026-03-01"}
    send(cleo, weir.module, at(weir.nut, outcome="failed", mode=weir.worn, note="grit", **details, **days))
    out, went = Fitting.objects.get(reason="failed"), Fitting.objects.get(serial="A-7")
    assert (out.failed_on, out.last_good_on) == (dt.date(2026, 3, 7), dt.date(2026, 3, 1))
    assert (out.found_by, out.note) == ("by chance", "grit")
    assert (went.lot, went.age_at_fit, went.part) == ("L-2", 1200, weir.n2)
    assert Reading.objects.get(position=weir.nut).play_mm == 1.5


def test_an_unreported_stop_is_written_down_whole(weir, cleo):
    since = {"stood_day": "2026-03-06", "stood_time": "22:30"}
    assert send(cleo, weir.module, at(weir.nut, outcome="failed", mode=weir.worn), **since).status_code == 302
    stop = Stop.objects.get()
    assert stop.stopped_at == dt.datetime(2026, 3, 6, 22, 30, tzinfo=dt.UTC)
    assert stop.running_at == NOW


def test_two_phones_open_the_form_and_the_second_is_told(weir, cleo):
    stale = opened(cleo, weir.module) | at(weir.nut, outcome="fitted") | {"finish": "done"}
    answer = cleo.post(log_address(weir.module), stale)
    assert answer.status_code == 422
    assert "A part is fitted here already" in answer.content.decode()


def test_only_who_may_log_reaches_the_form_and_only_for_own_sites(weir, client):
    elsewhere = make_crew(make_site())
    for person, status in [(weir.crew, 200), (weir.manager, 200), (weir.contact, 403), (elsewhere, 404)]:
        client.force_login(person)
        assert client.get(log_address(weir.module)).status_code == status
        data = {
            "entry_key": str(uuid.uuid4()),
            "all_well": "on",
            "day": "2026-03-09",
            "time": "14:00",
            "left": "running",
        }
        posted = client.post(log_address(weir.module), data).status_code
        assert posted == (302 if status == 200 else status)
    assert Visit.objects.count() == 2


def test_the_form_asks_a_fixed_number_of_questions(weir, cleo, django_assert_num_queries):
    from django.db import connection
    from django.test.utils import CaptureQueriesContext

    cleo.get(log_address(weir.module))
    with CaptureQueriesContext(connection) as few:
        cleo.get(log_address(weir.module))
    from tests.factories import make_component, make_mode, make_position

    for _ in range(6):
        component = make_component()
        make_position(type=weir.type, component=component)
        make_mode(component=component)
        make_part(component=component)
    with django_assert_num_queries(len(few)):
        cleo.get(log_address(weir.module))


def test_before_anything_is_typed_the_likely_modules_are_one_tap_away(weir, cleo):
    Carriage(code="KM-9", site=make_site(code="ELSEWHERE"))  # not hers
    send(cleo, weir.module, all_well="on", left="stopped", strokes="100")
    page = cleo.get(reverse("log"))
    assert [module.code for module in page.context["stopped"]] == ["KM-1"]
    assert [module.code for module in page.context["last"]] == ["KM-1"]
    assert [site.code for site in page.context["sites"]] == [weir.site.code]
    there = cleo.get(reverse("log"), {"site": weir.site.code.lower()})
    assert f'href="{log_address(weir.module)}"' in there.content.decode()
    hidden = cleo.get(reverse("log"), {"site": "ELSEWHERE"})
    assert "KM-9" not in hidden.content.decode()
