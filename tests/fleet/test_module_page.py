"""Cast: Mara manages every site; Cleo is crew and Cora a contact at the weir. Module KM-1 stood at the weir, then at
the mill, and stands at the weir again."""

from __future__ import annotations

import csv
import datetime as dt
import io

import pytest
import time_machine
from django.db import connection
from django.test import Client
from django.test.utils import CaptureQueriesContext
from django.urls import reverse

from fleet.actions.entries import CounterEntry, PartChange
from fleet.actions.place_module import place_module
from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.actions.record_visit import record_visit
from fleet.actions.report_stop import report_stop
from fleet.models import Fitting
from tests.factories import Carriage, make_bench, make_crew, make_depot, make_site

pytestmark = pytest.mark.django_db
NOW = dt.datetime(2026, 3, 9, 14, 5, tzinfo=dt.UTC)


@pytest.fixture(autouse=True)
def _now():
    with time_machine.travel(NOW, tick=False):
        yield


def noon(text: str) -> dt.datetime:
    return dt.datetime.fromisoformat(f"{text}T12:00:00+00:00")


def visit(carriage: Carriage, day: str, strokes: int | None = None, note: str = "", **change):
    entry = CounterEntry(strokes=strokes) if strokes is not None else None
    changes = [PartChange(**{"position": carriage.nut, "part": carriage.n2, **change})] if change else []
    return record_visit(
        by=carriage.manager, module=carriage.module, happened_at=noon(day), counter=entry, changes=changes, note=note
    )


@pytest.fixture
def weir() -> Carriage:
    """At the weir to June 2025, at the mill to the end of the year, at the weir again."""
    site = make_site(code="WEIR", name="North Weir", zone="Europe/Lisbon")
    carriage = Carriage(site=site, code="KM-1", from_on=dt.date(2025, 1, 10), bay="B-4")
    mill = make_site(code="MILL", name="Old Mill", zone="Europe/Lisbon")
    carriage.fit(carriage.n1, "2025-01-10")
    carriage.fit(carriage.s1, "2025-01-10")
    visit(carriage, "2025-01-10", strokes=0)
    visit(carriage, "2025-03-02", strokes=40_000, note="first nut", reason="failed", mode=carriage.worn)
    place_module(by=carriage.manager, module=carriage.module, site=mill, from_on=dt.date(2025, 6, 1))
    visit(carriage, "2025-08-20", strokes=90_000, note="a secret of the mill", reason="failed", mode=carriage.worn)
    visit(carriage, "2025-10-03", strokes=104_000, note="another secret", reason="planned")
    place_module(by=carriage.manager, module=carriage.module, site=site, from_on=dt.date(2026, 1, 1), bay="B-4")
    visit(carriage, "2026-02-01", strokes=150_000, note="back home", reason="planned")
    return carriage


def page(person, **query: str):
    client = Client()
    client.force_login(person)
    return client.get(reverse("module", args=["KM-1"]), query)


def plain(answer) -> str:
    return answer.content.decode().replace("\u202f", " ").replace("\u00a0", " ")


def test_a_manager_sees_all_of_its_past(weir):
    answer = page(weir.manager)
    text = plain(answer)
    assert answer.status_code == 200
    for told in (
        "North Weir",
        "Bay B-4",
        "here since 1 January 2026",
        "first nut",
        "a secret of the mill",
        "back home",
    ):
        assert told in text
    lines = answer.context["drawings"]["wide"]
    assert lines.count('class="fail"') == 2
    assert lines.count('class="wd"') == 2


def test_a_contact_sees_only_what_happened_at_their_site(weir):
    answer = page(weir.contact)
    text = plain(answer)
    assert "first nut" in text
    assert "back home" in text
    for secret in ("a secret of the mill", "Old Mill", "MILL", "20 August 2025", "90 000", "another secret"):
        assert secret not in text
    lines = answer.context["drawings"]["wide"]
    assert lines.count('class="fail"') == 1
    assert lines.count('class="open-start"') == 2  # nut and screw came back with it
    fitted = {line.stay.fitting.pk: line.stay for line in answer.context["fittings"]}
    middle = Fitting.objects.get(fitted_on="2025-03-02")
    assert (fitted[middle.pk].fitted_on, fitted[middle.pk].removed_on) == (dt.date(2025, 3, 2), None)
    assert Fitting.objects.get(fitted_on="2025-08-20").pk not in fitted  # it came and went at the mill
    second = Fitting.objects.get(fitted_on="2025-10-03")
    assert (fitted[second.pk].fitted_on, fitted[second.pk].removed_on) == (None, dt.date(2026, 2, 1))


def test_its_file_tells_a_contact_no_more_than_the_page(weir):
    text = b"".join(page(weir.contact, **{"as": "csv"}).streaming_content).decode("utf-8-sig")
    rows = list(csv.DictReader(io.StringIO(text)))
    assert len(rows) == 5
    assert "2025-08-20" not in text
    assert "2025-10-03" not in text
    whole = b"".join(page(weir.manager, **{"as": "csv"}).streaming_content).decode("utf-8-sig")
    assert "2025-08-20" in whole
    first = next(row for row in csv.DictReader(io.StringIO(whole)) if row["removed_on"] == "2025-03-02")
    assert (first["age"], first["clock"], first["counted"], first["reason"]) == ("40000", "strokes", "yes", "failed")


def test_crews_of_other_sites_and_strangers_see_nothing(weir):
    assert page(make_crew(make_site())).status_code == 404
    assert Client().get(reverse("module", args=["KM-1"])).status_code == 302
    assert Client().get(reverse("module", args=["KM-1"])).url.startswith(reverse("sign_in"))


def test_what_is_fitted_now_with_its_age(weir):
    rows = {row.name: row for row in page(weir.manager).context["fitted"]}
    nut, screw = rows[weir.nuts.title], rows[weir.screws.title]
    assert (nut.fitting.part, nut.since) == (weir.n2, dt.date(2026, 2, 1))
    assert nut.age.value > 0
    assert not nut.age.measured
    # Days are exact: from the fitting to now, in service throughout.
    assert screw.age.value == pytest.approx((dt.date(2026, 3, 9) - dt.date(2025, 1, 10)).days + 14 / 24, abs=0.1)
    assert "the last reading, are reckoned with the recent duty" in plain(page(weir.manager))


def test_an_empty_position_and_an_unknown_day_say_so(weir):
    Fitting.objects.filter(position=weir.screw).delete()
    assert "empty" in plain(page(weir.manager))
    from tests.factories import make_fitting

    make_fitting(module=weir.module, position=weir.screw, part=weir.s1, fitted_on=None)
    rebuild_clocks([weir.module.pk])
    answer = page(weir.manager)
    assert "fitting day not known" in answer.context["drawings"]["wide"]
    assert "not known" in plain(answer)
    assert {"kind": "open", "label": "since when is not known"} in answer.context["key"]


def test_the_state_sentence(weir):
    assert "Running." in plain(page(weir.manager))
    report_stop(by=weir.contact, module=weir.module, stopped_at=noon("2026-03-08"), note="motor hums")
    text = plain(page(weir.manager))
    assert "Stands still since 8 March 2026, 12:00" in text
    assert "motor hums" in text
    depot = make_depot(name="Long Shed")
    place_module(by=weir.manager, module=weir.module, site=depot, from_on=dt.date(2026, 3, 9))
    assert "At Long Shed since 9 March 2026; its parts do not age meanwhile." in plain(page(weir.manager))
    assert page(make_bench(depot)).status_code == 200
    assert page(weir.contact).status_code == 404  # it stands there no more


def test_what_each_person_may_do_from_here(weir):
    def names(person) -> list[str]:
        return [action["name"] for action in page(person).context["actions"]]

    assert names(weir.contact) == ["Report a stop"]
    assert names(weir.crew) == ["Log a visit", "Report a stop", "Read the counter"]
    assert names(weir.manager)[0] == "Log a visit"


def test_correcting_is_offered_to_the_office_and_for_own_entries_of_the_day(weir):
    own = record_visit(by=weir.crew, module=weir.module, happened_at=NOW - dt.timedelta(hours=1))

    def offered(person) -> set[int]:
        return {visit.pk for visit in page(person).context["page"].visits if visit.correctable}

    assert offered(weir.crew) == {own.pk}
    assert len(offered(weir.manager)) == 6
    assert offered(weir.contact) == set()
    with time_machine.travel(NOW + dt.timedelta(days=1), tick=False):
        assert offered(weir.crew) == set()


def test_anyone_marks_a_line_and_it_shows(weir):
    client = Client()
    client.force_login(weir.contact)
    seen = page(weir.contact).context["page"].visits.object_list[0]
    client.post(reverse("say_looks_wrong", args=["visit", seen.pk]), {"word": "that was the other module"})
    assert "marked: looks wrong" in plain(page(weir.manager))


def test_struck_out_records_stay_readable_and_leave_the_drawing(weir):
    from fleet.actions.strike_out import strike_out

    reading = page(weir.manager).context["page"].readings[0]
    strike_out(by=weir.manager, record=reading, reason="read on the wrong module")
    answer = page(weir.manager)
    assert "Struck out: read on the wrong module" in plain(answer)
    assert answer.context["page"].clock.read_last("strokes") < dt.date(2026, 1, 1).toordinal()


def test_visits_page_and_keep_their_page_in_the_address(weir):
    for offset in range(14):
        record_visit(by=weir.manager, module=weir.module, happened_at=NOW - dt.timedelta(hours=offset))
    first, second = page(weir.manager), page(weir.manager, page="2")
    assert len(first.context["page"].visits.object_list) == 12
    assert first.context["page"].visits.paginator.count == 19
    assert len(second.context["page"].visits.object_list) == 7
    assert page(weir.manager, page="x\x00").status_code == 200
    assert page(weir.manager, page="9" * 30).status_code == 200


@pytest.mark.parametrize("who", ["manager", "crew", "contact"])
def test_a_longer_past_asks_no_more_questions(weir, who):
    person = getattr(weir, who)
    page(person)
    with CaptureQueriesContext(connection) as few:
        page(person)
    for month in range(1, 3):
        for day in (5, 12, 19):
            stamp = f"2026-0{month}-{day:02d}"
            if month == 2 or day > 1:
                visit(carriage=weir, day=stamp, note=f"visit {stamp}")
    report_stop(by=weir.manager, module=weir.module, stopped_at=noon("2026-03-07"))
    with CaptureQueriesContext(connection) as many:
        page(person)
    assert len(many) <= len(few)


def test_no_style_stands_in_the_page_and_every_control_has_a_name(weir):
    text = page(weir.manager).content.decode()
    assert " style=" not in text
    assert "<script>" not in text
