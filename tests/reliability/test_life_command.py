"""`manage.py life`: a table for people, one JSON document, and errors that say what to do."""

from __future__ import annotations

import io
import json
from typing import Any

import pytest
from django.core.management import CommandError, call_command

from fleet.actions.rebuild_clocks import rebuild_clocks
from reliability.life_panels import PANELS
from tests.reliability.small_fleet import SmallFleet, day

pytestmark = pytest.mark.django_db


@pytest.fixture(autouse=True)
def _fleet() -> None:
    fleet = SmallFleet()
    lock = fleet.site()
    for number in range(30):
        part = fleet.n1 if number % 2 else fleet.n2
        fleet.fit(fleet.module(f"ADA-{number}", lock), 0, 20 + 3 * number, "failed", part=part)
    fleet.fit(fleet.module("BEN", lock), None)
    rebuild_clocks()


def run(*arguments: str, **options: Any) -> str:
    printed = io.StringIO()
    call_command("life", *arguments, stdout=printed, **options)
    return printed.getvalue()


def test_people_get_a_table_a_sentence_and_what_was_left_out() -> None:
    text = run("nut", "--by", "part", "--as-of", "2024-12-01").replace("\u00a0", " ").replace("\u202f", " ")
    lines = text.splitlines()
    assert lines[0] == "Drive nut, lives in days, as of 2024-12-01"
    assert [line.split()[0] for line in lines[3:5]] == ["N1", "N2"]
    assert "Half of the N1 drive nuts fail within" in text
    assert "fitting day not known: 1" in text
    assert "do not certify safe life" in text


def test_json_is_one_document() -> None:
    document = json.loads(run("NUT", "--json", "--as-of", day(60).isoformat()))
    assert (document["component"], document["as_of"], document["confidence"]) == ("NUT", "2024-03-01", 0.95)
    assert document["left_out"] == [{"reason": "fitting day not known", "count": 1}]
    assert document["groups"][0]["failures"] == 14  # those of 20 to 59 days
    for panel in PANELS:
        assert document[panel.key]["sentence"]


def test_a_narrower_confidence_gives_a_narrower_interval() -> None:
    wide, narrow = (json.loads(run("NUT", "--json", "--confidence", level)) for level in ("0.95", "0.5"))
    assert narrow["groups"][0]["median"]["lower"] > wide["groups"][0]["median"]["lower"]


def test_only_one_part() -> None:
    assert json.loads(run("NUT", "--json", "--part", "n1"))["groups"][0]["lives"] == 15


@pytest.mark.parametrize(
    ("arguments", "told"),
    [
        (["SCREW"], "There is no component SCREW. Choose one of NUT."),
        (["NUT", "--site", "NOWHERE"], "There is no site NOWHERE. Choose one of LOCK."),
        (["NUT", "--as-of", "2999-01-01"], "1\u00a0January 2999 has not come yet. Choose today or an earlier day."),
        (["NUT", "--set", "TRIAL"], "There is no set TRIAL. No set is in the book yet."),
    ],
)
def test_what_cannot_be_answered_is_refused(arguments: list[str], told: str) -> None:
    with pytest.raises(CommandError, match=told) as refusal:
        run(*arguments)
    assert refusal.value.returncode == 1


@pytest.mark.parametrize(
    "arguments", [[], ["NUT", "--clock", "years"], ["NUT", "--as-of", "yesterday"], ["NUT", "--confidence", "95"]]
)
def test_wrong_usage_is_told(arguments: list[str]) -> None:
    with pytest.raises(CommandError):
        run(*arguments)


def test_an_empty_choice_is_said_in_words() -> None:
    assert "No life of this component" in run("NUT", "--as-of", "2023-01-01")
