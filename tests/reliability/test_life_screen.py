"""Cast: Ines, manager of all sites; Otto, a planner of one site; a fleet of nuts and one screw, told in days."""

from __future__ import annotations

import csv
import io
import re
from typing import Any

import pytest
from django.db import connection
from django.test import Client
from django.test.utils import CaptureQueriesContext
from django.urls import reverse

from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.models import Component, DataVersion, FailureMode, LifeSet, Part, SetLife
from reliability.charts.groups import MOST_GROUPS
from reliability.forms.life import GROUPINGS
from reliability.life_answer import life_document
from reliability.life_panels import PANELS
from reliability.life_works import fit_lives
from tests.factories import make_manager, make_planner
from tests.reliability.small_fleet import SmallFleet, day

pytestmark = pytest.mark.django_db
AS_OF = "2024-07-01"
LIFE = "/life/"


class Nuts(SmallFleet):
    """N1 fails at 20 to 90 days, N2 later; twelve of each at two sites, some still running."""

    def __init__(self) -> None:
        super().__init__()
        self.lock, self.mill = self.site("LOCK", name="Withy Lock"), self.site("MILL", name="Marl Mill")
        for number in range(12):
            module = self.module(f"M-{number}", self.lock if number % 2 else self.mill)
            life = 20 + 6 * number
            mode = self.worn if number % 3 else self.stripped
            self.fit(module, 0, life, "failed", mode=mode, part=self.n1, lot=f"L{number % 2}")
            if number < 7:
                self.fit(module, life, min(life + 50 + 3 * number, 170), "failed", mode=self.worn, part=self.n2)
            else:
                self.fit(module, life, part=self.n2)
        self.fit(module, None, 90, "failed", mode=self.worn)
        self.fit(module, 10, 30, "failed", struck_out="entered twice")
        self.screws = Component.objects.create(code="SCREW", name="Lead screw", clock="days")
        self.s1 = Part.objects.create(code="S1", component=self.screws)
        rebuild_clocks()


@pytest.fixture
def nuts() -> Nuts:
    return Nuts()


@pytest.fixture
def ines() -> Client:
    client = Client()
    client.force_login(make_manager(code="INES"))
    return client


def text_of(reply: Any) -> str:
    """What is read on the page: without markup, with plain spaces."""
    body = re.sub(r"<(script|style).*?</\1>", " ", reply.content.decode(), flags=re.DOTALL)
    return re.sub(r"\s+", " ", re.sub(r"<[^>]+>", " ", body).replace("&#x27;", "'"))


def lines_of(reply: Any) -> list[dict[str, str]]:
    text = b"".join(reply.streaming_content).decode("utf-8-sig")
    return list(csv.DictReader(io.StringIO(text)))


def ask(client: Client, **choices: Any) -> Any:
    return client.get(LIFE, {"as_of": AS_OF, **choices})


def test_it_opens_on_the_component_that_failed_most(nuts: Nuts, ines: Client) -> None:
    page = text_of(ask(ines))
    assert "Life of the Drive nut" in page
    assert "in days, from the records of 1 July 2024" in page


def test_the_sentence_comes_first_with_its_interval_and_counts(nuts: Nuts, ines: Client) -> None:
    document = life_document("NUT", by="part", as_of=day(182))
    n2 = document["groups"][1]
    page = text_of(ask(ines))
    lead = page.index("of 12 have failed; 5 are still running")
    assert n2["running"] == 5
    assert "(we are 95 % sure it lies between" in page[:lead]
    order = ["Still working at each age", "Lives by part", "Weibull plot", "Warnings, and what was left", "How this"]
    places = [page.index(words) for words in order]
    assert places == sorted(places)
    assert lead < places[0]


def test_table_and_file_hold_the_document(nuts: Nuts, ines: Client) -> None:
    document = life_document("NUT", by="part", as_of=day(182))
    rows = lines_of(ask(ines, **{"as": "csv"}))
    assert [row["group"] for row in rows] == ["N1", "N2"]
    for row, group in zip(rows, document["groups"], strict=True):
        assert int(row["failures"]) == group["failures"]
        for name in ("b10", "median", "mean"):
            assert float(row[name]) == pytest.approx(group[name]["estimate"])
            assert float(row[f"{name}_lower"]) == pytest.approx(group[name]["lower"])
        assert float(row["shape_upper"]) == pytest.approx(group["weibull"]["shape"]["upper"])
    curve = lines_of(ask(ines, **{"as": "curve.csv"}))
    told = [float(row["survival"]) for row in curve if row["group"] == "N1"]
    assert told == pytest.approx(document["groups"][0]["curve"]["survival"])
    line = lines_of(ask(ines, **{"as": "line.csv"}))
    first = document["groups"][0]["fitted"]
    assert [float(row["survival"]) for row in line if row["group"] == "N1"] == pytest.approx(first["survival"])
    whole = ask(ines, **{"as": "json"}).json()
    assert {key: whole[key] for key in document} == document
    assert {panel.key for panel in PANELS} <= set(whole)


def test_choices_stand_in_the_address_and_narrow_the_answer(nuts: Nuts, ines: Client) -> None:
    narrowed = ask(
        ines, component="nut", by="site", site="LOCK", mode="WORN", confidence="0.8", **{"as": "json"}
    ).json()
    told = life_document("NUT", by="site", sites=["LOCK"], modes=["WORN"], confidence=0.8, as_of=day(182))
    assert {key: narrowed[key] for key in told} == told
    page = text_of(ask(ines, component="nut", by="site", site="LOCK", mode="WORN", confidence="0.8"))
    assert "Chosen: only at Withy Lock; only failures by WORN." in page
    assert "If only this mode acted (WORN)" in page
    assert "we are 80 % sure" in page


@pytest.mark.parametrize("by", [value for value, _ in GROUPINGS])
def test_every_grouping_answers(nuts: Nuts, ines: Client, by: str) -> None:
    reply = ask(ines, by=by)
    assert reply.status_code == 200
    assert reply.context["document"]["by"] == (None if by == "all" else by)


def test_parts_of_another_component_fall_away_with_it(nuts: Nuts, ines: Client) -> None:
    Part.objects.create(code="S2", component=nuts.screws)
    assert ask(ines, component="NUT", part="S1").status_code == 200
    assert ask(ines, component="NUT", part="S1").context["form"].question()["parts"] is None


@pytest.mark.parametrize(
    "wrong",
    [
        {"component": "NAME"},
        {"component": "NUT\0"},
        {"part": "NAME"},
        {"part": "\0"},
        {"site": "A" * 10_000},
        {"mode": "😀"},
        {"by": "colour"},
        {"clock": "moons"},
        {"as_of": "yesterday"},
        {"as_of": "2999-01-01"},
        {"as_of": "2024-02-31"},
        {"confidence": "0"},
        {"confidence": "nan"},
        {"worn": "1"},
    ],
    ids=str,
)
def test_what_cannot_be_meant_is_answered_at_its_field(nuts: Nuts, ines: Client, wrong: dict[str, str]) -> None:
    reply = ines.get(LIFE, {"component": "NUT", **wrong})
    (name,) = wrong
    assert reply.status_code == 422
    assert name in reply.context["form"].errors
    assert "These choices cannot be answered yet." in text_of(reply)
    assert "\0" not in reply.content.decode()


def test_what_was_left_out_is_counted_with_a_reason_and_listed(nuts: Nuts, ines: Client) -> None:
    reply = ask(ines, component="NUT")
    left_out = {row["reason"]: row for row in reply.context["left_out"]}
    assert left_out["fitting day not known"]["count"] == 1
    assert left_out["struck out"]["count"] == 1
    listed = ines.get(left_out["struck out"]["url"])
    assert "Left out: struck out" in text_of(listed)
    assert "entered twice" in text_of(listed)
    (row,) = lines_of(ines.get(left_out["fitting day not known"]["url"] + "&as=csv"))
    assert row["Module"] == "M-11"
    assert ines.get(reverse("life_left_out"), {"component": "NUT", "reason": "no such"}).status_code == 404


def test_a_planner_of_one_site_meets_no_other_by_name(nuts: Nuts) -> None:
    """Estimates draw on all sites; the names, groups, rows and warnings are only those of their own."""
    nuts.mill.reports_at_once = None
    nuts.mill.save()
    rebuild_clocks()
    otto = Client()
    otto.force_login(make_planner(sites=[nuts.lock]))
    for choices in ({}, {"by": "site"}, {"by": "all"}, {"by": "site", "as": "csv"}, {"by": "site", "as": "curve.csv"}):
        reply = ask(otto, **choices)
        body = b"".join(reply.streaming_content) if reply.streaming else reply.content
        assert reply.status_code == 200
        assert b"MILL" not in body
        assert b"Marl Mill" not in body
    assert "Nobody has said whether every failure is reported at once at some sites" in text_of(ask(otto))
    for by in ("site", "part"):
        assert "MILL" not in ask(otto, by=by, **{"as": "json"}).content.decode()
    assert ask(otto, site="MILL").status_code == 422
    everybody = life_document("NUT", by="part", as_of=day(182))
    assert ask(otto, **{"as": "json"}).json()["groups"][0]["failures"] == everybody["groups"][0]["failures"]
    listed = otto.get(reverse("life_left_out"), {"component": "NUT", "as_of": AS_OF, "reason": "struck out"})
    assert "M-11" in text_of(listed)  # it stands at the lock
    nuts.fit(nuts.module("M-99", nuts.mill), 10, 30, "failed", struck_out="twice too")
    listed = otto.get(reverse("life_left_out"), {"component": "NUT", "as_of": AS_OF, "reason": "struck out"})
    assert "M-99" not in text_of(listed)


def test_the_number_of_queries_does_not_grow_with_the_fleet(nuts: Nuts, ines: Client) -> None:
    def asked() -> int:
        ask(ines, by="site")  # computes and keeps
        with CaptureQueriesContext(connection) as queries:
            ask(ines, by="site")
        return len(queries)

    few = asked()
    for number in range(15):
        Part.objects.create(code=f"N{number + 10}", component=nuts.component)
        FailureMode.objects.create(code=f"MODE-{number}", component=nuts.component)
        Component.objects.create(code=f"C-{number}", clock="days")
        nuts.fit(nuts.module(f"X-{number}", nuts.site(f"SITE-{number}")), 0, 30 + number, "failed")
    rebuild_clocks()
    DataVersion.raise_version()
    assert asked() == few <= 12
    told = ask(ines, by="site").context["document"]
    assert (len(told["groups"]), len(told["more_groups"])) == (MOST_GROUPS, 17 - MOST_GROUPS)


def test_a_book_without_components_says_what_to_do(ines: Client) -> None:
    assert "No component is in the book yet. A component is a sort of part" in text_of(ines.get(LIFE))


def test_a_component_without_lives_says_what_to_do(nuts: Nuts, ines: Client) -> None:
    assert "No part of this component has been fitted yet" in text_of(ask(ines, component="SCREW"))
    assert "No life of this component matches these choices" in text_of(ask(ines, component="SCREW", rigs="on"))
    nuts.fit(nuts.module("M-77", nuts.lock), None, part=nuts.s1)
    rebuild_clocks()
    DataVersion.raise_version()
    page = text_of(ask(ines, component="SCREW"))
    assert "No life of this component counts under these choices" in page
    assert "fitting day not known" in page


def test_no_failure_gives_bounds_and_no_shape(nuts: Nuts, ines: Client) -> None:
    for number in range(5):
        nuts.fit(nuts.module(f"S-{number}", nuts.lock), 10 * number, part=nuts.s1)
    rebuild_clocks()
    page = text_of(ask(ines, component="SCREW"))
    assert "None of the S1 lead screws has failed: 5 parts" in page
    assert "Too few failures to fit" in page
    assert "not reached" in page
    assert "cannot tell yet" in page
    assert "The oldest ran 182 days" in page
    assert "100–100" not in page  # no band without a failure
    (row,) = lines_of(ask(ines, component="SCREW", **{"as": "csv"}))
    assert row["shape"] == row["median"] == ""


def test_four_failures_still_get_no_shape_and_five_do(nuts: Nuts, ines: Client) -> None:
    for number in range(6):
        failed = {"removed": 30 + 10 * number, "reason": "failed"} if number < 4 else {}
        nuts.fit(nuts.module(f"S-{number}", nuts.lock), 0, part=nuts.s1, **failed)
    rebuild_clocks()
    assert "Only four of 6 among the S1 lead screws have failed" in text_of(ask(ines, component="SCREW"))
    nuts.fit(nuts.module("S-7", nuts.lock), 0, 100, "failed", part=nuts.s1)
    rebuild_clocks()
    DataVersion.raise_version()
    page = text_of(ask(ines, component="SCREW"))
    assert "Too few failures to fit" not in page
    assert "Shape" in page


def test_all_at_one_age_is_told_and_not_fitted(nuts: Nuts, ines: Client) -> None:
    for number in range(6):
        nuts.fit(nuts.module(f"S-{number}", nuts.lock), 0, 40, "failed", part=nuts.s1)
    rebuild_clocks()
    page = text_of(ask(ines, component="SCREW"))
    assert "how fast they wear cannot be told" in page
    assert "All 6 failures can lie at the age 40" in page
    assert "read off the curve" in page


def test_parts_looked_at_only_once_are_answered(nuts: Nuts, ines: Client) -> None:
    """Current-status data: each part found failed or good at its one inspection (an imported set)."""
    chosen = LifeSet.objects.create(code="LOOK")
    for hours, good, bad in ((10, 39, 0), (18, 49, 4), (26, 31, 9), (34, 13, 6), (42, 15, 21), (46, 15, 21)):
        for observed, since, count in ((False, None, good), (True, 0, bad)):
            fields = {"age": hours, "observed": observed, "last_good_age": since, "count": count, "clock": "days"}
            if count:
                SetLife.objects.create(set=chosen, component=nuts.screws, **fields)
    page = text_of(ask(ines, component="SCREW", set="LOOK"))
    assert "Chosen: lives of the imported set LOOK." in page
    assert "were only found at a later look" in page
    assert "61 of 223" in page


def test_worn_parts_taken_as_good_are_warned_of(nuts: Nuts, ines: Client) -> None:
    nuts.fit(nuts.module("W-1", nuts.lock), 0, 30, "worn to limit")
    rebuild_clocks()
    page = text_of(ask(ines, worn="withdrawn"))
    assert "parts worn to the limit taken as removed in good order" in page
    assert "about to fail, so the lives shown here are too long" in page


def test_the_first_page_of_the_day_is_read_and_not_computed(nuts: Nuts, ines: Client, monkeypatch: Any) -> None:
    """The daily work asks exactly what the screen asks when nothing is chosen."""

    class Steps:
        def step(self, done: int, total: int, message: str) -> None:
            assert done < total

    assert fit_lives(None, Steps()) == {"components": 2}
    monkeypatch.setattr("reliability.life_answer.life_document", lambda *_, **__: pytest.fail("computed again"))
    for component in ("NUT", "SCREW"):
        assert ines.get(LIFE, {"component": component}).status_code == 200
