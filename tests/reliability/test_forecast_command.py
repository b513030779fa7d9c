"""The forecast command: its document, its table, its refusals; and real input from the field."""

from __future__ import annotations

import io
import json
from pathlib import Path

import pytest
from django.core.management import CommandError, call_command

from reliability.management.commands.forecast import lines_of
from tests.bearing_cage import write_records
from tests.reliability.small_fleet import SmallFleet
from tests.reliability.test_forecast import lived_fleet

pytestmark = pytest.mark.django_db


def printed(*arguments: str) -> str:
    out = io.StringIO()
    call_command("forecast", *arguments, stdout=out)
    return out.getvalue()


def test_the_document_has_the_words_of_the_design() -> None:
    lived_fleet(20)
    asked = ("--component", "nut", "--as-of", "2025-05-15", "--from", "2025-06-02", "--days", "28", "--json")
    found = json.loads(printed(*asked, "--bands", "0.5,0.9"))
    assert {"from", "days", "as_of", "component", "total", "by", "rows"} <= set(found)
    assert (found["from"], found["days"], found["component"], found["by"]) == ("2025-06-02", 28, "NUT", "part")
    assert set(found["total"]["bands"]) == {"0.5", "0.9"}
    assert set(found["total"]["plan_for"]) == {"0.95"}
    weekly = json.loads(printed(*asked, "--by", "week"))
    assert [row["group"] for row in weekly["rows"]] == ["2025-06-02", "2025-06-09", "2025-06-16", "2025-06-23"]


def test_the_table_says_it_in_a_sentence() -> None:
    lived_fleet(20)
    text = printed("--as-of", "2025-05-15", "--days", "28")
    assert "Drive nut: 7" in text.replace("\u00a0", " ")
    assert "will fail (80 of 100 such stretches:" in text
    assert "parts is enough in 95 of 100" in text


def test_the_table_plans_for_the_parts_that_are_used_not_for_failures_alone() -> None:
    """As the sentence above it and the screen do: a failure may take other parts along."""
    total = {"mean": 8.0, "bands": {"0.8": [6, 10]}, "plan_for": {"0.95": 11}}
    used = {**total, "plan_for": {"0.95": 25}}
    told = {
        "from": "2027-01-04",
        "days": 91,
        "as_of": "2026-12-01",
        "title": "nut",
        "counted": True,
        "by": "part",
        "positions": 40,
        "failures_seen": 9,
        "left_out": [],
        "warnings": [],
        "total": {**total, "parts_used": used},
        "rows": [{"group": "N1", **total, "parts_used": used}],
    }
    lines = lines_of(told)
    assert "Having 25\u00a0parts is enough" in lines[1]
    assert [line.split()[-1] for line in lines[3:5]] == ["25", "25"]
    weekly = lines_of({**told, "by": "week", "rows": [{"group": "2027-01-04", **total}]})
    assert weekly[4].split()[-1] == "–"


def test_all_components_make_one_document() -> None:
    lived_fleet(6)
    assert [each["component"] for each in json.loads(printed("--json"))["forecasts"]] == ["NUT"]


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("--component", "SAIL"), "There is no component SAIL. The book has: NUT."),
        (("--from", "2024-01-01", "--as-of", "2024-02-01"), "lies before --as-of"),
        (("--as-of", "2190-01-01"), "has not come yet"),
        (("--days", "0"), "no number of days"),
        (("--days", "many"), "no number of days"),
        (("--from", "31.12.2026"), "no day"),
        (("--bands", "80"), "no confidence"),
    ],
)
def test_wrong_use_is_refused_in_words(arguments: tuple[str, ...], words: str) -> None:
    SmallFleet()
    with pytest.raises(CommandError, match=words):
        printed(*arguments)


@pytest.mark.django_db(transaction=True)
def test_the_bearing_cage_fleet_has_a_wide_band(tmp_path: Path) -> None:
    """Six failures in 1,703 units (Meeker & Escobar 1998, ch. 8): the next 300 hours a unit are very uncertain.

    Plugged in, the published fit (shape 2.035, scale 11,792 h) expects about 5 failures in these hours, with a
    Poisson band of 2 to 8; what six failures leave open must make the band wider than that.
    """
    write_records(tmp_path / "cage")
    call_command("import_records", str(tmp_path / "cage"), stdout=io.StringIO())
    found = json.loads(
        printed("--component", "CAGE", "--as-of", "2024-06-30", "--from", "2024-06-30", "--days", "30", "--json")
    )
    low, high = found["total"]["bands"]["0.8"]
    assert found["positions"] == 1697
    assert 2.5 < found["total"]["mean"] < 9
    assert low <= 3
    assert 8 <= high <= 18
