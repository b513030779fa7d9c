"""A redesign's page, print, files and command: what is read first, who sees what, what is refused."""

from __future__ import annotations

import json
from io import StringIO
from typing import Any

import pytest
from django.core.management import CommandError, call_command
from django.test import Client
from django.urls import reverse

from fleet.actions.plan_rollout import plan_rollout
from fleet.formats import long_day, number, percent
from fleet.models import Module
from reliability import redesign_words as words
from reliability.redesign_money import money_sentence
from tests.factories import make_book, make_crew, make_manager, make_planner
from tests.reliability.rollout_fleet import TODAY, RolloutFleet
from tests.reliability.small_fleet import day

pytestmark = pytest.mark.django_db
AS_OF = day(TODAY).isoformat()


class Screen:
    def __init__(self, longer: float = 2.0, **fields: Any) -> None:
        self.fleet = RolloutFleet(longer, sites=6, modules=10, **fields)
        self.redesign = self.fleet.redesign(name="wiper lip", cost_a_module=50)
        self.client = Client()
        self.client.force_login(make_manager())

    def page(self, name: str = "redesign", **asked: Any) -> Any:
        return self.client.get(reverse(name, args=["LIP"]), {"as_of": AS_OF, **asked})

    def text(self, name: str = "redesign", **asked: Any) -> str:
        return self.page(name, **asked).content.decode()


def test_the_page_reads_from_verdict_to_method() -> None:
    text = Screen().text()
    order = [
        "Clear: the N2 drive nuts live longer than N1.",
        "What the four verdicts mean",
        "Over the same dates, at the same sites",
        "How many times as long",
        "The path to the verdict",
        "One failure mode at a time",
        "How comparable they are",
        "Does it pay",
        "For the engineer",
        "How this is computed",
    ]
    places = [text.index(words) for words in order]
    assert places == sorted(places)
    assert f"we are {percent(0.95)} sure it lies between" in text


def test_files_carry_the_same_figures() -> None:
    screen = Screen()
    document = screen.page(**{"as": "json"}).json()
    lines = b"".join(screen.page(**{"as": "csv"}).streaming_content).decode("utf-8-sig").splitlines()
    assert lines[0] == "figure,which,assumed,estimate,lower,upper"
    ratio = document["same_dates"]["ratio"]["sites differ"]["median"]
    assert f"life ratio median,same dates,sites differ,{ratio['estimate']},{ratio['lower']},{ratio['upper']}" in lines


def test_what_follows_the_choices_holds_their_day_and_their_sheets() -> None:
    """The list alone is swapped when a choice changes: what depends on it stands in there."""
    text = Screen().text(money="hope")
    follows = text[text.index('<div id="list">') :]
    assert f"From the records of {long_day(day(TODAY))}" in follows
    assert f"/print/?as_of={AS_OF}&amp;money=hope" in follows
    assert text.count("/print/") == 1


def test_choices_stay_in_the_address_and_bad_ones_are_told() -> None:
    screen = Screen()
    assert "If only" in screen.text(mode="STRIPPED")
    late = screen.page(as_of="2999-01-01")
    assert late.status_code == 422
    assert "This day has not come yet" in late.content.decode()
    assert screen.page(as_of="soon").status_code == 422
    assert screen.page(mode="NONE-SUCH").status_code == 422
    assert screen.page(also="N2").status_code == 422, "the new part itself is no other candidate"


def test_a_planner_of_one_site_reads_no_other_sites_name() -> None:
    screen = Screen()
    plan_rollout(by=None, redesign=screen.redesign, modules=list(Module.objects.all()), first_on=day(TODAY))
    screen.client.force_login(make_planner(sites=[screen.fleet.places[0]]))
    for asked in ({}, {"as": "json"}, {"as": "csv"}):
        reply = screen.page(**asked)
        body = b"".join(reply.streaming_content) if reply.streaming else reply.content
        assert b"SITE-2" not in body, asked
    assert "other sites" in screen.text()
    for name in ("redesign_print", "redesign_money", "rollout"):
        assert "SITE-2" not in screen.text(name), name


def test_crews_see_no_evidence() -> None:
    screen = Screen()
    screen.client.force_login(make_crew(screen.fleet.places[0]))
    for name in ("redesign", "redesign_print", "redesign_money", "rollout", "edit_redesign"):
        assert screen.page(name).status_code == 403


def test_money_with_and_without_its_costs() -> None:
    screen = Screen()
    without = screen.text("redesign_money")
    assert "No cost is entered yet" in without
    make_book(visit_cost=100, stop_cost_per_day=20)
    plan_rollout(
        by=None, redesign=screen.redesign, modules=list(Module.objects.all()), first_on=day(TODAY), modules_a_week=10
    )
    text = screen.text("redesign_money")
    assert "No cost is entered yet" not in text
    assert "In the next 13 weeks it avoids about" in text
    assert "at the lower bound" in text or "If it really lived only" in text


def test_the_print_has_two_sheets_and_who_made_them() -> None:
    text = Screen().text("redesign_print")
    assert text.count('class="redesign-sheet') == 2
    assert "printed by" in text
    assert "do not certify safe life" in text


def test_a_redesign_without_parts_or_lives_says_what_to_do() -> None:
    from fleet.models import Redesign

    client = Client()
    client.force_login(make_manager())
    Redesign.objects.create(code="BARE")
    assert "Name the new part" in client.get(reverse("redesign", args=["BARE"])).content.decode()
    assert "No redesign" not in client.get(reverse("redesigns")).content.decode()


def test_the_command_says_the_same_and_refuses_in_words() -> None:
    Screen()
    out = StringIO()
    call_command("redesign", "n2", "--as-of", AS_OF, stdout=out)
    assert out.getvalue().startswith("Clear: the N2 drive nuts live longer than N1.")
    out = StringIO()
    call_command("redesign", "N2", "--before", "N1", "--as-of", AS_OF, "--json", stdout=out)
    assert json.loads(out.getvalue())["verdict"]["phrase"] == "clear"
    for given, told in (
        (["NO-SUCH"], "no part NO-SUCH"),
        (["N1"], "supersedes no part"),
        (["N2", "--before", "N2"], "against itself"),
    ):
        with pytest.raises(CommandError, match=told):
            call_command("redesign", *given, stdout=StringIO())


BAND = {"mean": -17.0, "lower": -35.0, "upper": 4.0}


def test_a_part_that_brings_failures_is_said_to() -> None:
    told = {
        "quarters": [{"failures_avoided": BAND, "money_saved": {"mean": -9400.0, "lower": -14000.0, "upper": 2000.0}}],
        "rollout_cost": 0,
        "break_even": {"estimate": None, "quarters": 4, "chance": 0.0},
    }
    sentence = money_sentence(told, "EUR")
    assert sentence.replace("\u00a0", " ").startswith(
        "In the next 13 weeks it brings about 17 more failures (−4 to 35 in 80 of 100 cases)"
    )
    assert f"costs about {number(9400)} EUR" in sentence


@pytest.mark.parametrize(
    ("chance", "told"), [(0.9999, "above 99 in 100"), (0.004, "below 1 in 100"), (0.5, "50 in 100")]
)
def test_chances_are_never_said_to_be_certain(chance: float, told: str) -> None:
    assert words.in_hundred(chance) == told
