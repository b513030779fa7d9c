"""Sentences a manager without statistics understands."""

from __future__ import annotations

from typing import Any

import pytest

from reliability.wording import life_sentence, plural


def document(**fields: Any) -> dict[str, Any]:
    told = {"component": "NUT", "component_name": "Nut", "clock": "days", "by": "part", "confidence": 0.95, "modes": []}
    return {**told, **fields}


def group(**fields: Any) -> dict[str, Any]:
    estimate = {"estimate": 61.2, "lower": 54.1, "upper": 69.8}
    told = {
        "group": "N2", "lives": 118, "failures": 41, "running": 77, "removed_otherwise": 0, "exposure": 9_120_400,
        "curve": {"last_age": 90}, "median": estimate, "b10": {"estimate": 21.0, "lower": 15.8, "upper": 26.3},
        "few_failures": None,
    }  # fmt: skip
    return {**told, **fields}


def plain(sentence: str) -> str:
    return sentence.replace("\u202f", " ").replace("\u00a0", " ")


def few(failures: int) -> dict[str, Any]:
    bounds = [{"shape": 1.0, "b10_lower": 900.0}, {"shape": 2.0, "b10_lower": 1234.0}]
    return group(failures=failures, few_failures={"bounds": bounds}, median=None, b10=None)


def test_the_usual_sentence() -> None:
    assert plain(life_sentence(document(), group())) == (
        "Half of the N2 nuts fail within 61.2 days (we are 95 % sure it lies between 54.1 and 69.8). "
        "41 of 118 have failed; 77 are still running."
    )


def test_strokes_are_rounded_to_what_the_interval_leaves() -> None:
    estimate = {"estimate": 61_034.2, "lower": 54_210.0, "upper": 70_411.0}
    told = plain(life_sentence(document(clock="strokes"), group(median=estimate, curve={"last_age": 99_000})))
    assert "within 61 000 strokes (we are 95 % sure it lies between 54 200 and 70 400)" in told


def test_without_an_upper_limit() -> None:
    told = life_sentence(document(), group(median={"estimate": 61.2, "lower": 54.1, "upper": None}))
    assert "sure it is at least 54.1; the records give no upper limit)" in told


def test_a_median_nobody_has_seen_yet_speaks_of_one_in_ten() -> None:
    told = plain(life_sentence(document(), group(curve={"last_age": 40})))
    assert told.startswith(
        "One in ten of the N2 nuts fails within 21 days (we are 95 % sure it lies between 15.8 and 26.3)."
    )
    assert "has not been seen yet: the oldest ran 40 days." in told


def test_one_in_ten_beyond_what_was_seen_is_called_an_expectation() -> None:
    told = plain(life_sentence(document(), group(curve={"last_age": 10})))
    assert "is expected to fail within 21 days" in told
    assert "beyond what has been seen; none has run longer than 10 days yet." in told


def test_few_failures_name_the_assumption() -> None:
    assert plain(life_sentence(document(clock="strokes"), few(3))) == (
        "Only three of 118 among the N2 nuts have failed in 9 120 000 strokes together, too few to say how fast they "
        "wear. If they wear as parts often do (shape 2), we are 95 % sure that nine in ten last longer than "
        "1 230 strokes."
    )


def test_no_failure_yet() -> None:
    told = plain(life_sentence(document(), few(0)))
    assert told.startswith("None of the N2 nuts has failed: 118 parts in 9 120 000 days together.")


def test_where_sites_differ_the_figure_is_that_of_a_typical_one() -> None:
    assert life_sentence(document(), group(independent={"median": {}})).startswith("At a typical site half of the N2")
    told = life_sentence(document(), group(independent={"median": {}}, curve={"last_age": 40}))
    assert told.startswith("At a typical site one in ten of the N2")


def test_other_removals_and_chosen_modes_are_said() -> None:
    told = plain(life_sentence(document(modes=["WORN"]), group(removed_otherwise=1, running=1, failures=1)))
    assert told.startswith("If only WORN acted: Half of the N2 nuts")
    assert told.endswith("1 of 118 has failed; 1 is still running; 1 was taken out for another reason.")


@pytest.mark.parametrize(
    ("by", "label", "who"),
    [
        (None, "all", "Half of the nuts fail"),
        ("site", "K-3", "Half of the nuts at K-3 fail"),
        ("type", "BC20", "Half of the nuts in BC20 modules fail"),
        ("lot", "A7", "Half of the nuts of lot A7 fail"),
        ("quarter", "2026-Q1", "Half of the nuts fitted in 2026-Q1 fail"),
    ],
)
def test_every_grouping_has_its_words(by: str | None, label: str, who: str) -> None:
    assert life_sentence(document(by=by), group(group=label)).startswith(who)


@pytest.mark.parametrize(
    ("name", "many"),
    [
        ("Drive nut", "drive nuts"),
        ("brush", "brushes"),
        ("Assembly", "assemblies"),
        ("Relay", "relays"),
        ("NUT", "NUT parts"),
    ],
)
def test_plurals(name: str, many: str) -> None:
    assert plural(name) == many
