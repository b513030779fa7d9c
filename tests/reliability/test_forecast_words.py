"""The sentences of a forecast, on documents written by hand."""

from __future__ import annotations

from typing import Any

import pytest

from reliability import forecast_words as words


def told(mean: float, low: int, high: int, **levels: int) -> dict[str, Any]:
    plan = {"0.95": high + 2} | {name.removeprefix("at_").replace("_", "."): value for name, value in levels.items()}
    return {"mean": mean, "median": round(mean), "bands": {"0.8": [low, high]}, "plan_for": plan}


def document(**changes: Any) -> dict[str, Any]:
    total = told(334.2, 308, 361)
    return {
        "from": "2027-01-04",
        "days": 91,
        "as_of": "2026-12-01",
        "clock": "days",
        "positions": 400,
        "counted": True,
        "failures_seen": 90,
        "total": {**total, "parts_used": total},
        "weeks": [told(24.0, 18, 31), told(27.4, 20, 35)],
        "age_profile": [
            {"part": "N2", "age_from": 0.0, "age_to": 20.0, "count": 30},
            {"part": "N3", "age_from": 0.0, "age_to": 20.0, "count": 10},
            {"part": "N3", "age_from": 20.0, "age_to": 40.0, "count": 35},
            {"part": "N2", "age_from": 80.0, "age_to": 100.0, "count": 1},
        ],
        "left_out": [],
        **changes,
    }


def plain(text: str) -> str:
    return text.replace("\u00a0", " ")


def test_a_quarter_is_called_one_and_other_stretches_are_not() -> None:
    assert plain(words.lead(document(), "drive nut")) == (
        "About 334 drive nuts will fail (80 of 100 quarters: 308 to 361). Having 363 parts is enough in 95 of 100."
    )
    assert "80 of 100 such stretches" in words.lead(document(days=28), "drive nut")
    assert words.is_next_quarter(document())
    assert not words.is_next_quarter(document(days=28))
    assert not words.is_next_quarter(document(**{"from": "2027-01-11"}))


@pytest.mark.parametrize(
    ("changes", "said"),
    [
        ({"positions": 0}, "No drive nut runs in the field, so none can fail."),
        ({"counted": False}, "No life of a drive nut is on record yet. We cannot tell."),
        ({"failures_seen": 0}, "No drive nut has failed so far. Most likely 334 will fail."),
    ],
)
def test_where_nothing_or_little_is_known_it_says_so(changes: dict[str, Any], said: str) -> None:
    assert plain(words.lead(document(**changes), "drive nut")).startswith(said)


def test_one_part_is_no_parts() -> None:
    once = told(0.1, 0, -1)
    said = plain(words.lead(document(failures_seen=0, total={**once, "parts_used": once}), "drive nut"))
    assert said.endswith("Most likely 0 will fail. Having 1 part is enough in 95 of 100.")


def test_the_level_that_was_asked_for_is_told_whatever_the_order() -> None:
    asked = told(300.0, 280, 330, at_0_9=325)
    turned = {**asked, "plan_for": dict(reversed(asked["plan_for"].items()))}
    for each in (asked, turned):
        assert (words.plan_for(each), words.service_of(each)) == (325, "90 of 100")
    assert words.service_of(told(1.0, 0, 3)) == "95 of 100"
    assert plain(words.out_of(0.995)) == "995 of 1 000"


def test_weeks_are_told_in_like_digits() -> None:
    assert plain(words.weekly(document(), "drive nut")) == (
        "Drive nuts failing a week: from 24 to 27 expected; in 80 of 100 weeks between 18 and 35."
    )
    even = document(weeks=[told(3.91, 1, 7), told(3.94, 1, 6)])
    assert "about 3.9 expected" in plain(words.weekly(even, "seal"))
    assert words.weekly(document(weeks=[]), "seal") == ""


def test_the_ages_of_the_fleet_in_one_sentence() -> None:
    assert plain(words.ages(document(), "drive nut")) == (
        "Half of the 76 drive nuts in service are younger than 20 days; 1 is older than 80."
    )
    assert words.ages(document(age_profile=[]), "drive nut") == "No drive nut runs in the field."
