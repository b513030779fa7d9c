"""Kept forecasts: kept once and whole, never changed, seen by whom they concern, and held against what happened."""

from __future__ import annotations

import datetime as dt
import uuid
from typing import Any

import pytest
import time_machine
from django.db import DatabaseError, connection, transaction
from django.db.models.deletion import ProtectedError
from django.test import Client

from fleet.actions.errors import RecordError
from fleet.models import Component, DataVersion, Fitting
from reliability import forecast_kept_words as words
from reliability.forecasts.keep_forecast import keep_forecast
from reliability.forecasts.next_quarter import forecast_document, question_of
from reliability.models import KeptForecast, KeptForecastsNeverChange
from tests.factories import make_crew, make_manager, make_planner
from tests.reliability.kept_forecasts import make_kept_forecast, weekly_document
from tests.reliability.small_fleet import SmallFleet, day
from tests.reliability.test_forecast import AS_OF, lived_fleet

pytestmark = pytest.mark.django_db
BEGIN = dt.date(2024, 6, 3)  # a Monday, day 154 of the small fleet


def ines(client: Client) -> Client:
    client.force_login(make_manager(code="INES"))
    return client


def keep(client: Client, query: str = "", **said: Any) -> Any:
    return client.post(f"/forecast/keep/?{query}", {"note": "for the budget", **said})


# --- keeping ---


def test_the_question_the_versions_and_the_whole_document_are_stored(client: Client) -> None:
    lived_fleet(6)
    answer = keep(ines(client), "component=NUT")
    kept = KeptForecast.objects.get()
    assert answer["Location"] == f"/forecast/kept/{kept.pk}/"
    assert (kept.component.code, kept.note, kept.made_by.code, kept.of_all_sites) == (
        "NUT",
        "for the budget",
        "INES",
        True,
    )
    assert kept.version.startswith("0.1.0, methods ")
    assert kept.data_version == DataVersion.current()
    shown = client.get("/forecast/?component=NUT&as=json").json()["forecasts"][0]
    for name in ("from", "days", "total", "weeks", "groups", "age_profile"):
        assert kept.document[name] == shown[name]
    assert "counted_at" not in kept.document


def test_without_a_choice_the_shown_component_is_kept(client: Client) -> None:
    lived_fleet(6)
    page = ines(client).get("/forecast/").content.decode()
    assert 'action="/forecast/keep/?component=NUT"' in page


def test_sent_twice_it_is_kept_once(client: Client) -> None:
    lived_fleet(6)
    ines(client)
    key = str(uuid.uuid4())
    first, second = keep(client, entry_key=key), keep(client, entry_key=key)
    assert first["Location"] == second["Location"]
    assert KeptForecast.objects.count() == 1
    assert keep(client, entry_key=key, note="another").status_code == 422
    assert KeptForecast.objects.count() == 1


@pytest.mark.parametrize(("query", "said"), [("begin=soon", {}), ("duty=0", {}), ("", {"note": "x" * 501})])
def test_what_cannot_be_kept_is_refused_and_nothing_is_stored(client: Client, query: str, said: dict[str, str]) -> None:
    lived_fleet(6)
    assert keep(ines(client), query, **said).status_code == 422
    assert not KeptForecast.objects.exists()


def test_nobody_keeps_sites_of_others(client: Client) -> None:
    fleet = lived_fleet(6)
    mine = make_planner(sites=[fleet_site("LOCK")])
    question = question_of(fleet.component, as_of=day(AS_OF), begin=day(AS_OF), days=28, sites=["WEIR"])
    with pytest.raises(RecordError, match="not yours"):
        keep_forecast(by=mine, question=question, document=forecast_document(question))
    with pytest.raises(RecordError, match="only some"):
        keep_forecast(by=mine, question=question_of(fleet.component), document={})
    assert not KeptForecast.objects.exists()


def fleet_site(code: str) -> Any:
    from fleet.models import Site

    return Site.objects.get(code=code)


# --- never changed ---


def test_no_path_of_the_program_changes_or_takes_away_a_kept_forecast() -> None:
    fleet = SmallFleet()
    kept = make_kept_forecast(component=fleet.component, made_by=make_manager())
    before = KeptForecast.objects.values().get()
    kept.note = "better"
    for change in (
        kept.save,
        lambda: kept.save(force_update=True),
        kept.delete,
        lambda: KeptForecast.objects.filter(pk=kept.pk).update(note="better"),
        lambda: KeptForecast.objects.all().delete(),
        lambda: KeptForecast.objects.bulk_update([kept], ["note"]),
        lambda: KeptForecast.objects.update_or_create(pk=kept.pk, defaults={"note": "better"}),
    ):
        with pytest.raises(KeptForecastsNeverChange), transaction.atomic():
            change()
    with pytest.raises(ProtectedError):
        fleet.component.delete()
    assert KeptForecast.objects.values().get() == before


@pytest.mark.parametrize("statement", ["UPDATE {} SET note = 'better'", "DELETE FROM {}_sites", "DELETE FROM {}"])
def test_the_database_of_a_team_refuses_even_plain_statements(statement: str) -> None:
    """PostgreSQL by a trigger; on SQLite, where triggers do not survive a rebuilt table, the program alone."""
    fleet = SmallFleet()
    make_kept_forecast(component=fleet.component, made_by=make_manager(), sites=[fleet.site()])
    if connection.vendor != "postgresql":
        assert "trigger" not in {row[0] for row in rows_of("SELECT type FROM sqlite_master")}
        return
    with pytest.raises(DatabaseError, match="never changed"), transaction.atomic(), connection.cursor() as cursor:
        cursor.execute(statement.format(KeptForecast._meta.db_table))


def rows_of(query: str) -> list[Any]:
    with connection.cursor() as cursor:
        cursor.execute(query)
        return list(cursor.fetchall())


def test_later_entries_do_not_touch_what_was_kept(client: Client) -> None:
    fleet = lived_fleet(6)
    keep(ines(client))
    before = KeptForecast.objects.get().document
    module = fleet.module("LATE", fleet_site("LOCK"))
    fleet.fit(module, 480, 490, "failed", part=fleet.n2)
    DataVersion.raise_version()
    client.post("/forecast/")
    assert KeptForecast.objects.get().document == before


# --- seen by whom ---


def test_a_planner_of_some_sites_sees_what_counts_only_those(client: Client) -> None:
    fleet = SmallFleet()
    lock, weir = fleet.site("LOCK"), fleet.site("WEIR")
    manager = make_manager()
    mine, both, all_sites = (
        make_kept_forecast(component=fleet.component, made_by=manager, sites=sites)
        for sites in ([lock], [lock, weir], None)
    )
    client.force_login(make_planner(sites=[lock]))
    assert client.get(f"/forecast/kept/{mine.pk}/").status_code == 200
    for other in (both, all_sites):
        assert client.get(f"/forecast/kept/{other.pk}/").status_code == 404
    assert list(client.get("/forecast/kept/").context["page"].object_list) == [mine]
    client.force_login(make_planner())
    assert client.get(f"/forecast/kept/{all_sites.pk}/").status_code == 200
    client.force_login(make_crew(lock))
    assert client.get(f"/forecast/kept/{mine.pk}/").status_code == 403


# --- held against what happened ---


def happened_fleet(weekly: list[int]) -> SmallFleet:
    """So many nuts fail on the Wednesday of each week from BEGIN on, one in a module of its own each."""
    fleet = SmallFleet()
    site = fleet.site("LOCK")
    first = (BEGIN - day(0)).days + 2
    for week, count in enumerate(weekly):
        for number in range(count):
            module = fleet.module(f"M-{week}-{number}", site)
            fleet.fit(module, 10, first + 7 * week, "failed", part=fleet.n1)
    from fleet.actions.rebuild_clocks import rebuild_clocks

    rebuild_clocks()
    return fleet


def test_weeks_inside_and_outside_are_told(client: Client) -> None:
    fleet = happened_fleet([4, 7, 2, 20])
    kept = make_kept_forecast(component=fleet.component, made_by=make_manager(), begin=BEGIN)
    with time_machine.travel(dt.datetime(2024, 6, 26, 12, tzinfo=dt.UTC), tick=False):
        page = ines(client).get(f"/forecast/kept/{kept.pk}/").content.decode().replace("\u00a0", " ")
        document = client.get(f"/forecast/kept/{kept.pk}/?as=json").json()
        lines = b"".join(client.get(f"/forecast/kept/{kept.pk}/?as=csv").streaming_content).decode().splitlines()
    # three whole weeks have passed; of 4, 7 and 2 failures the bands 2 to 6 and 1 to 7 hold two and three
    assert "Of 3 weeks that have passed, 2 lay inside the 80 in 100 band, 1 inside the 50 and 3 inside the 95" in page
    assert "So far 13 Drive nuts failed; 12.0 were expected by now." in page
    assert [week["failures"] for week in document["happened"]["weeks"]] == [4, 7, 2]
    assert document["document"] == kept.document
    assert [line.split(",")[-1] for line in lines[1:]] == ["4", "7", "2", ""]


def test_after_its_last_day_the_total_is_judged(client: Client) -> None:
    fleet = happened_fleet([4, 7, 2, 20, 9])
    kept = make_kept_forecast(component=fleet.component, made_by=make_manager(), begin=BEGIN)
    with time_machine.travel(dt.datetime(2024, 9, 1, 12, tzinfo=dt.UTC), tick=False):
        page = ines(client).get(f"/forecast/kept/{kept.pk}/").content.decode().replace("\u00a0", " ")
    assert "In all 33 Drive nuts failed; 16.0 were expected. That lies above the 80 in 100 band, 10 to 22." in page


def test_a_small_book_counted_on_paper(client: Client) -> None:
    """Four weeks from 3 June, day 154; read on 3 July, day 184.

    Week 1: one failed. Week 2: one failed, one struck out, one on the test stand. Week 3: one failed that came out in
    week 4, one worn to limit; a module was withdrawn with its part, which is no failure. Week 4: one of which the book
    heard after twelve days, a module without a place on record, and a planned replacement. The part that failed a day
    before the first and came out on it, and the one that failed on the day after the last, belong to other weeks.
    """
    from fleet.actions.rebuild_clocks import rebuild_clocks

    fleet = SmallFleet()
    site, stand = fleet.site(), fleet.site("TANK", kind="rig")
    first = (BEGIN - day(0)).days
    assert first == 154

    def ended(tag: str, at: int, reason: str = "failed", where: Any = site, **fields: Any) -> None:
        module = fleet.module(tag, where)
        old = fleet.fit(module, 10, at, reason, **fields)
        if reason != "module withdrawn":
            following = {"code": f"{tag}-NEXT", "module": module, "position": old.position, "part": fleet.n2}
            Fitting.objects.create(**following, fitted_on=day(at), struck_out=fields.get("struck_out", ""))

    ended("W1", first)
    ended("W2", first + 13)
    ended("STRUCK", first + 9, struck_out="entered twice")
    ended("STAND", first + 9, where=stand)
    ended("W3-OUT-LATER", first + 22, failed=first + 20)
    ended("W3-WORN", first + 15, "worn to limit")
    ended("W3-GONE", first + 16, "module withdrawn")
    ended("W4-LATE", first + 27, known=first + 39)
    ended("W4-NOWHERE", first + 25, where=None)
    ended("W4-PLANNED", first + 24, "planned")
    ended("BEFORE", first, failed=first - 1)
    ended("AFTER", first + 28)
    rebuild_clocks()
    kept = make_kept_forecast(component=fleet.component, made_by=make_manager(), begin=BEGIN)
    with time_machine.travel(dt.datetime(2024, 7, 3, 12, tzinfo=dt.UTC), tick=False):
        page = ines(client).get(f"/forecast/kept/{kept.pk}/").content.decode().replace("\u00a0", " ")
        happened = client.get(f"/forecast/kept/{kept.pk}/?as=json").json()["happened"]
    assert [week["failures"] for week in happened["weeks"]] == [1, 1, 2, 2]
    # new parts go in when the old ones come out: BEFORE's and W1's in the first week, W3-OUT-LATER's in the fourth
    assert [week["parts_used"] for week in happened["weeks"]] == [2, 1, 1, 4]
    assert happened["parts"]["N1"] == {"failures": 6, "parts_used": 0}
    assert happened["parts"]["N2"] == {"failures": 0, "parts_used": 8}
    assert "In all 6 Drive nuts failed; 16.0 were expected. That lies below the 80 in 100 band, 10 to 22." in page
    # of eight failures of the year one was twelve days late; the last two weeks ended two and nine days ago
    assert "95 in 100 were in the book within 12 days: more may still come for the last 2 weeks." in page


def test_weeks_long_past_are_told_without_a_proviso(client: Client) -> None:
    fleet = happened_fleet([4, 7, 2, 20])
    kept = make_kept_forecast(component=fleet.component, made_by=make_manager(), begin=BEGIN)
    with time_machine.travel(dt.datetime(2024, 9, 1, 12, tzinfo=dt.UTC), tick=False):
        assert "may still come" not in ines(client).get(f"/forecast/kept/{kept.pk}/").content.decode()
    assert words.still_coming(1, 1, 9).endswith("9\u00a0days: more may still come for this week.")
    assert words.still_coming(4, 1, 9).endswith("more may still come for the last week.")
    assert words.still_coming(4, 4, 30).endswith("more may still come for every week so far.")


def test_before_the_first_week_is_over_it_waits(client: Client) -> None:
    fleet = happened_fleet([4])
    kept = make_kept_forecast(component=fleet.component, made_by=make_manager(), begin=BEGIN)
    with time_machine.travel(dt.datetime(2024, 6, 9, 12, tzinfo=dt.UTC), tick=False):
        page = ines(client).get(f"/forecast/kept/{kept.pk}/").content.decode()
    assert "No whole week of it has passed yet." in page


def test_other_sites_do_not_count_against_a_forecast_of_some(client: Client) -> None:
    fleet = happened_fleet([4, 3])
    elsewhere = make_kept_forecast(
        component=fleet.component, made_by=make_manager(), begin=BEGIN, sites=[fleet.site("WEIR")]
    )
    with time_machine.travel(dt.datetime(2024, 6, 18, 12, tzinfo=dt.UTC), tick=False):
        document = ines(client).get(f"/forecast/kept/{elsewhere.pk}/?as=json").json()
    assert [week["failures"] for week in document["happened"]["weeks"]] == [0, 0]


def test_the_list_says_what_to_do_when_it_is_empty(client: Client) -> None:
    assert "No forecast has been kept yet" in ines(client).get("/forecast/kept/").content.decode()


def test_the_list_narrows_by_component_and_by_words_of_the_note(client: Client) -> None:
    fleet, manager = SmallFleet(), make_manager()
    screws = Component.objects.create(code="SCREW", clock="days")
    autumn = make_kept_forecast(component=fleet.component, made_by=manager, note="Autumn order")
    make_kept_forecast(component=screws, made_by=manager, note="autumn")
    make_kept_forecast(component=fleet.component, made_by=manager)
    client.force_login(manager)
    assert list(client.get("/forecast/kept/?component=NUT&q=autumn").context["page"].object_list) == [autumn]
    assert "No kept forecasts match these filters." in client.get("/forecast/kept/?q=spring").content.decode()


def test_the_narrowest_band_is_named() -> None:
    week = weekly_document(SmallFleet().component, BEGIN, 1)["weeks"][0]
    found = [words.held_by(week, count).replace("\u00a0", " ") for count in (4, 2, 1, 0, 9)]
    assert found == ["50 in 100", "80 in 100", "95 in 100", "below all", "above all"]
