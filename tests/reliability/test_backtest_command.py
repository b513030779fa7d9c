"""The command that judges past forecasts: a document, a table, wrong use."""

from __future__ import annotations

import datetime as dt
import io
import json

import pytest
import time_machine
from django.core.management import CommandError, call_command

from reliability.forecasts.backtest import latest
from tests.reliability.small_fleet import SmallFleet
from tests.reliability.test_forecast import lived_fleet

pytestmark = pytest.mark.django_db


def printed(*arguments: str) -> str:
    out = io.StringIO()
    with time_machine.travel(dt.datetime(2025, 5, 15, 12, tzinfo=dt.UTC), tick=False):
        call_command("backtest", *arguments, stdout=out)
    return out.getvalue()


def test_the_document_the_table_and_what_is_kept_agree() -> None:
    fleet = lived_fleet(16)
    document = json.loads(printed("--component", "nut", "--quarters", "2", "--json"))
    assert (document["component"], document["asked"], document["judged"]) == ("NUT", 2, 2)
    rows = document["measures"]["failures"]["quarters"]
    assert [row["from"] for row in rows] == ["2024-10-07", "2025-01-06"]
    kept = latest(fleet.component)
    assert kept is not None
    assert kept["measures"] == document["measures"]
    text = printed("--quarters", "2").replace("\u00a0", " ")
    assert text.startswith("Drive nut: In the last 2 quarters ")
    assert f"2025-01-06{rows[1]['actual']:>13}" in text
    assert "Constant rate: missed by" in text
    assert [each["component"] for each in json.loads(printed("--quarters", "2", "--json"))["backtests"]] == ["NUT"]


def test_a_young_book_is_told_in_words() -> None:
    SmallFleet()
    assert "The records are too young" in printed()


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("--component", "SAIL"), "There is no component SAIL. The book has: NUT."),
        (("--quarters", "0"), "no number of quarters. Write 1 to 40."),
        (("--quarters", "all"), "no number of quarters"),
    ],
)
def test_wrong_use_is_refused_in_words(arguments: tuple[str, ...], words: str) -> None:
    SmallFleet()
    with pytest.raises(CommandError, match=words):
        printed(*arguments)
