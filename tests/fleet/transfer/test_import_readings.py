"""Counters in files: serials, swaps, roll-overs, and faces that may not fall, with the book's readings among them."""

from __future__ import annotations

from pathlib import Path

import pytest

from fleet.models import FittingClock, Reading
from tests.fleet.transfer.files import bring_in, fleet, look, problems

pytestmark = pytest.mark.django_db
HEAD = "module,read_at,counter,restarts,strokes,hours\n"


def told(*rows: str) -> list[tuple[str, int, str, str]]:
    return problems(look(fleet(readings=HEAD + "\n".join(f"K-10,{row}" for row in rows) + "\n")))


def test_a_rising_counter_is_fine() -> None:
    assert told("2024-02-01T10:00,C1,,100,5", "2024-03-01T10:00,,,100,6", "2024-04-01T10:00,C1,,300,") == []


def test_a_falling_counter_is_told_with_the_last_reading() -> None:
    (found,) = told("2024-02-01T10:00,C1,,500,", "2024-03-01T10:00,,,400,")

    assert found[:3] == ("readings.csv", 3, "strokes")
    assert "the last reading, 500 on 2024-02-01. Was the counter changed" in found[3]


def test_strokes_fall_though_a_reading_of_hours_stands_between() -> None:
    (found,) = told("2024-02-01T10:00,,,500,1", "2024-03-01T10:00,,,,2", "2024-04-01T10:00,,,400,3")

    assert found[:3] == ("readings.csv", 4, "strokes")


def test_hours_fall_alone() -> None:
    (found,) = told("2024-02-01T10:00,,,500,5", "2024-03-01T10:00,,,600,4")

    assert found[:3] == ("readings.csv", 3, "hours")


@pytest.mark.parametrize(
    "row", ["2024-03-01T10:00,C2,,10,", "2024-03-01T10:00,,reset,10,", "2024-03-01T10:00,,rolled over,10,"]
)
def test_a_new_serial_or_a_restart_may_begin_lower(row: str) -> None:
    assert told("2024-02-01T10:00,C1,,500,", row) == []


def test_a_new_serial_has_not_rolled_over() -> None:
    (found,) = told("2024-02-01T10:00,C1,,500,", "2024-03-01T10:00,C2,rolled over,10,")

    assert found[2] == "restarts"


def test_a_counter_between_two_readings_of_another() -> None:
    found = told("2024-02-01T10:00,C1,,500,", "2024-03-01T10:00,C2,,10,", "2024-04-01T10:00,C1,,600,")

    assert found[0][:3] == ("readings.csv", 3, "counter")


def test_a_struck_out_reading_counts_for_nothing() -> None:
    rows = HEAD.replace("hours", "struck_out") + "K-10,2024-02-01T10:00,,,500,typing\nK-10,2024-03-01T10:00,,,400,\n"

    assert problems(look(fleet(readings=rows))) == []


def test_the_book_stands_before_and_after(tmp_path: Path) -> None:
    bring_in(tmp_path)

    below = problems(look({"readings": HEAD + "K-9,2024-04-01T10:00,C1,,4000,\n"}))
    above = problems(look({"readings": HEAD + "K-9,2024-02-01T10:00,C1,,6000,\n"}))

    assert "is below the last reading, 5000" in below[0][3]
    assert "is above a later reading in the book, 5000" in above[0][3]


def test_a_reading_without_a_serial_takes_the_one_before(tmp_path: Path) -> None:
    bring_in(tmp_path, fleet(readings=HEAD + "K-10,2024-02-01T10:00,C1,,500,\nK-10,2024-03-01T10:00,,,600,\n"))
    assert list(Reading.objects.order_by("read_at").values_list("counter", flat=True)) == ["C1", "C1"]

    again = bring_in(tmp_path, {"readings": HEAD + "K-10,2024-03-01T10:00,,,600,\n"})
    assert again.result["files"][0]["passed_over"] == 1


def test_a_reading_is_never_edited(tmp_path: Path) -> None:
    bring_in(tmp_path)

    (found,) = problems(look({"readings": HEAD + "K-9,2024-03-01T10:00,C1,,5001,\n"}, update=True))

    assert "A reading is never edited: strike it out" in found[3]


def test_accumulated_strokes_run_over_a_swap(tmp_path: Path) -> None:
    rows = "K-10,2024-01-10T12:00,C1,,1000,\nK-10,2024-03-01T12:00,C1,,6000,\n"
    swapped = "K-10,2024-03-02T12:00,C2,,0,\nK-10,2024-05-01T12:00,C2,,2500,\n"
    fittings = (
        "fitting,module,position,part,fitted_on,removed_on,reason\nF-1,K-10,N1,N-1,2024-01-10,2024-05-01,failed\n"
    )
    bring_in(tmp_path, fleet(readings=HEAD + rows + swapped, fittings=fittings, visits=None, findings=None, stops=None))

    clock = FittingClock.objects.get()
    assert clock.strokes_at_end - clock.strokes_at_fit == 7500
