"""The panels at their addresses. Cast: Ines, manager of all sites; Otto, a planner of Alder Lock; Sven, of a crew."""

from __future__ import annotations

import copy
import re
from typing import Any

import pytest
from django.db import connection
from django.test import Client
from django.test.utils import CaptureQueriesContext
from django.urls import reverse

from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.models import LifeSet, SetLife
from reliability.charts.groups import FEWER_OF_MANY
from reliability.life_panels import PANELS
from tests.factories import make_crew, make_manager, make_planner
from tests.reliability.small_fleet import SmallFleet, day
from tests.reliability.test_life_screen import lines_of, text_of
from tests.reliability.worked_fleet import LAST_DAY, WorkedFleet

pytestmark = pytest.mark.django_db
AS_OF = day(LAST_DAY).isoformat()
ADDRESSES = [f"/life/{panel.name}/" for panel in PANELS]
HTMX = {"HX-Request": "true"}


@pytest.fixture(scope="module")
def made(made_once: Any) -> WorkedFleet:
    return made_once(lambda: WorkedFleet(bad_lot=True))


@pytest.fixture
def worked(made: WorkedFleet, db: None) -> WorkedFleet:
    return copy.deepcopy(made)


def signed_in(person: Any) -> Client:
    client = Client()
    client.force_login(person)
    return client


@pytest.fixture
def ines() -> Client:
    return signed_in(make_manager(code="INES"))


def body_of(reply: Any) -> str:
    return (b"".join(reply.streaming_content) if reply.streaming else reply.content).decode()


def test_the_page_brings_the_panels_when_they_come_into_sight(worked: WorkedFleet, ines: Client) -> None:
    """Nothing heavy is computed for the first answer; without scripts each panel is a link."""
    reply = ines.get("/life/", {"as_of": AS_OF, "by": "lot"})
    page = reply.content.decode()
    for address in ADDRESSES:
        waiting = re.search(rf'hx-get="({address}\?[^"]*)"', page)
        assert waiting, address
        assert f'href="{waiting[1]}"' in page
        assert "by=lot" in waiting[1]
    assert "What they fail by" in text_of(reply)


@pytest.mark.parametrize("address", ADDRESSES)
def test_each_panel_is_a_part_a_page_and_files(worked: WorkedFleet, ines: Client, address: str) -> None:
    asked = {"as_of": AS_OF, "component": "NUT"}
    part, page = ines.get(address, asked, headers=HTMX), ines.get(address, asked)
    assert part.status_code == page.status_code == 200
    assert "<html" not in part.content.decode()
    assert "<html" in page.content.decode()
    document = ines.get(address, {**asked, "as": "json"}).json()
    for reply in (part, page):
        assert re.sub(r"\s+", " ", document["sentence"]) in text_of(reply).replace("&amp;", "&")
    assert len(lines_of(ines.get(address, {**asked, "as": "csv"}))) > 0
    assert f'href="{reverse("life")}?as_of=' in page.content.decode()  # the way back keeps the choices


@pytest.mark.parametrize("address", ADDRESSES)
def test_a_refused_panel_says_why_and_its_file_is_empty(ines: Client, address: str) -> None:
    SmallFleet()
    rebuild_clocks()
    reply = ines.get(address, {"component": "NUT"})
    assert "We cannot tell, because" in text_of(reply)
    assert lines_of(ines.get(address, {"component": "NUT", "as": "csv"})) == []


@pytest.mark.parametrize("address", [*ADDRESSES, "/life/groups/", "/life/print/"])
def test_what_is_not_there_is_not_found(ines: Client, address: str) -> None:
    assert ines.get(address).status_code == 404  # no component
    SmallFleet()
    assert ines.get(address, {"component": "NAME"}).status_code == 404
    assert ines.get(address, {"component": "NUT", "as_of": "2999-01-01"}).status_code == 404


@pytest.mark.parametrize("address", ["/life/", *ADDRESSES, "/life/groups/", "/life/print/", "/life/left-out/"])
def test_only_managers_and_planners_see_them(worked: WorkedFleet, address: str) -> None:
    sven = signed_in(make_crew(worked.sites["ALDER"]))
    assert sven.get(address, {"component": "NUT"}).status_code == 403


@pytest.mark.parametrize("by", ["part", "site", "all"])
def test_a_planner_of_one_site_meets_no_other_by_name(worked: WorkedFleet, by: str) -> None:
    otto = signed_in(make_planner(sites=[worked.sites["ALDER"]]))
    others = [code for code in worked.sites if code != "ALDER"]
    for address in ("/life/", *ADDRESSES, "/life/groups/", "/life/print/"):
        for kind in ("", "csv", "json"):
            body = body_of(otto.get(address, {"as_of": AS_OF, "component": "NUT", "by": by, "as": kind}))
            named = [code for code in others if code in body or f"{code.title()} Lock" in body]
            assert not named, f"{address} as {kind or 'page'} names {named}"
    ines = signed_in(make_manager())
    everything = body_of(ines.get("/life/stand-outs/", {"as_of": AS_OF, "component": "NUT"}))
    assert all(code in everything for code in others)


def test_estimates_of_a_planner_of_one_site_draw_on_all_sites(worked: WorkedFleet) -> None:
    otto, ines = signed_in(make_planner(sites=[worked.sites["ALDER"]])), signed_in(make_manager())
    asked = {"as_of": AS_OF, "component": "NUT", "as": "json"}
    for key, address in (("effects", "/life/duty/"), ("groups", "/life/modes/")):
        own, whole = (client.get(address, asked).json()[key] for client in (otto, ines))
        assert [row["failures"] for row in own] == [row["failures"] for row in whole]


def test_many_lots_stay_few_on_the_page_and_all_in_the_list(ines: Client) -> None:
    fleet = SmallFleet()
    lock = fleet.site()
    for number in range(70):
        module = fleet.module(f"M-{number}", lock)
        for life in (20, 30 + number):
            fleet.fit(module, 0, life, "failed", lot=f"LOT-{number}")
    fleet.fit(fleet.module("RUNS", lock), 0, lot="NEW")
    rebuild_clocks()
    asked = {"as_of": AS_OF, "component": "NUT", "by": "lot"}
    reply = ines.get("/life/", asked)
    assert len(reply.context["document"]["groups"]) == FEWER_OF_MANY
    assert "All 71 groups" in text_of(reply)
    assert "141 lives" in text_of(reply)
    assert reply.context["lead"].startswith("None of the drive nuts of lot NEW has failed")  # the one that still runs
    first = ines.get("/life/groups/", {**asked, "sort": "-lives"})
    assert "All 71 groups" in text_of(first)
    assert "11 groups with fewest lives are not fitted" in text_of(first)
    second = ines.get("/life/groups/", {**asked, "page": "2"})
    shown = [cell for cell in (f"LOT-{number}" for number in range(70)) if cell in first.content.decode()]
    assert len(shown) >= 50
    assert "LOT-69" in second.content.decode()
    assert len(lines_of(ines.get("/life/", {**asked, "as": "csv"}))) == 71


def test_two_sheets_say_who_when_and_everything_in_words(worked: WorkedFleet) -> None:
    ines = signed_in(make_manager(code="INES", name="Ines Harrow"))
    page = text_of(ines.get("/life/print/", {"as_of": AS_OF, "component": "NUT"}))
    for told in ("printed by Ines Harrow on", "from the records of 27 October 2024", "For the engineer: Drive nut"):
        assert told in page
    for panel in PANELS:
        assert panel.title in page
    assert "do not certify safe life" in page


def test_a_component_without_lives_prints_what_was_left_out(ines: Client) -> None:
    fleet = SmallFleet()
    fleet.fit(fleet.module("ADA", fleet.site()), None, 50, "failed")
    rebuild_clocks()
    page = text_of(ines.get("/life/print/", {"component": "NUT"}))
    assert "No life of this component counts under these choices." in page
    assert "fitting day not known" in page


def test_a_kept_panel_is_read_with_few_queries(worked: WorkedFleet, ines: Client) -> None:
    asked = {"as_of": AS_OF, "component": "NUT"}
    for address in ADDRESSES:
        ines.get(address, asked, headers=HTMX)
        with CaptureQueriesContext(connection) as queries:
            ines.get(address, asked, headers=HTMX)
        assert len(queries) <= 12, (address, len(queries))


def test_left_out_lives_of_a_set_are_listed(ines: Client) -> None:
    fleet = SmallFleet()
    chosen = LifeSet.objects.create(code="TRIAL")
    fields = {"set": chosen, "component": fleet.component, "part": fleet.n1}
    for age in range(20, 40):
        SetLife.objects.create(age=age, observed=True, clock="days", site="LOCK", **fields)
    SetLife.objects.create(age=77, observed=True, clock="strokes", site="MILL", count=2, **fields)
    SetLife.objects.create(age=5, entry_age=5, observed=False, clock="days", **fields)
    reply = ines.get("/life/", {"component": "NUT", "set": "TRIAL"})
    left_out = {row["reason"]: row for row in reply.context["left_out"]}
    assert {reason: row["count"] for reason, row in left_out.items()} == {
        "counted on another clock": 2,
        "nothing observed yet: age 0": 1,
    }
    (other,) = lines_of(ines.get(left_out["counted on another clock"]["url"] + "&as=csv"))
    assert (other["Age"], other["Counted in"], other["Equal lives"]) == ("77.0", "strokes", "2")
    (unseen,) = lines_of(ines.get(left_out["nothing observed yet: age 0"]["url"] + "&as=csv"))
    assert unseen["Entered at"] == "5.0"
    otto = signed_in(make_planner(sites=[fleet.site("LOCK")]))
    asked = {"component": "NUT", "set": "TRIAL", "reason": "counted on another clock"}
    assert "MILL" not in text_of(otto.get(reverse("life_left_out"), asked))
