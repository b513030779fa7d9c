"""The same rules on counted clocks, worked by hand: never beyond what was measured, and said where it is not."""

from __future__ import annotations

import pytest

from tests.reliability.small_fleet import SmallFleet, left_out, rows_of

pytestmark = pytest.mark.django_db


@pytest.fixture
def fleet() -> SmallFleet:
    return SmallFleet(clock="strokes")


def test_strokes_between_readings_are_rounded_like_days(fleet: SmallFleet) -> None:
    ada = fleet.module("ADA", fleet.site())
    fleet.read(ada, 0.5, strokes=0)
    fleet.read(ada, 60.5, strokes=100)
    fleet.fit(ada, 0, 20, "failed")  # 33.3 strokes
    fleet.fit(ada, 0, 20, "planned")
    found = fleet.lives(100)
    assert rows_of(found) == [(0, 33, "withdrawn", None, 1), (0, 34, "failed", None, 1)]
    assert found.warnings == []


def test_a_running_part_counts_to_the_last_reading_not_to_the_as_of_day(fleet: SmallFleet) -> None:
    ada = fleet.module("ADA", fleet.site())
    fleet.read(ada, 0.5, strokes=0)
    fleet.read(ada, 60.5, strokes=6000)
    fleet.fit(ada, 0)
    fleet.fit(ada, 80)
    found = fleet.lives(100)
    assert rows_of(found) == [(0, 6000, "running", None, 1)]
    assert left_out(found) == {"nothing observed yet: age 0": 1}


def test_a_reading_after_the_as_of_day_is_not_used(fleet: SmallFleet) -> None:
    ada = fleet.module("ADA", fleet.site())
    for at, strokes in ((0.5, 0), (60.5, 6000), (90.5, 9000)):
        fleet.read(ada, at, strokes=strokes)
    fleet.fit(ada, 0)
    assert rows_of(fleet.lives(80)) == [(0, 6000, "running", None, 1)]


def test_counts_written_down_at_the_change_of_parts_win(fleet: SmallFleet) -> None:
    ada = fleet.module("ADA", fleet.site())
    fleet.read(ada, 0.5, strokes=0)
    fleet.read(ada, 60.5, strokes=6000)
    fleet.fit(ada, 10, 30, "failed", strokes_at_fit=900, strokes_at_removal=3111)
    assert rows_of(fleet.lives(100)) == [(0, 2211, "failed", None, 1)]


def test_a_failure_past_the_last_reading_is_carried_on_and_warned_of(fleet: SmallFleet) -> None:
    ada = fleet.module("ADA", fleet.site())
    fleet.read(ada, 0.5, strokes=0)
    fleet.read(ada, 60.5, strokes=6000)
    fleet.fit(ada, 0, 80, "failed")
    found = fleet.lives(100)
    assert rows_of(found) == [(0, 8000, "failed", None, 1)]
    assert "strokes of 1 of 1 lives" in found.warnings[0]


def test_without_readings_the_duty_of_the_site_counts_and_is_warned_of(fleet: SmallFleet) -> None:
    lock = fleet.site(strokes_per_day=50)
    fleet.fit(fleet.module("ADA", lock), 0, 80, "failed")
    fleet.fit(fleet.module("BEN", lock), 0)
    found = fleet.lives(100)
    assert rows_of(found) == [(0, 4000, "failed", None, 1), (0, 4975, "running", None, 1)]  # fitted at noon
    assert "2 of 2" in found.warnings[0]


def test_without_readings_and_duty_nothing_can_be_counted(fleet: SmallFleet) -> None:
    fleet.fit(fleet.module("ADA", fleet.site()), 0, 80, "failed")
    found = fleet.lives(100)
    assert found.lifetimes is None
    assert left_out(found) == {"neither readings nor a duty known": 1}


def test_failed_on_the_day_it_was_fitted_counts_its_strokes_or_none(fleet: SmallFleet) -> None:
    ada = fleet.module("ADA", fleet.site())
    fleet.read(ada, 0.5, strokes=0)
    fleet.fit(ada, 5, 5, "failed", strokes_at_fit=500, strokes_at_removal=720)
    fleet.fit(ada, 5, 5, "failed")
    found = fleet.lives(100)
    assert rows_of(found) == [(0, 220, "failed", None, 1)]
    assert left_out(found) == {"nothing observed yet: age 0": 1}


def test_a_swapped_counter_does_not_make_strokes_fall(fleet: SmallFleet) -> None:
    ada = fleet.module("ADA", fleet.site())
    fleet.read(ada, 0.5, strokes=5000, counter="OLD")
    fleet.read(ada, 20.5, strokes=7000, counter="OLD")
    fleet.read(ada, 20.5, strokes=40, counter="NEW")
    fleet.read(ada, 60.5, strokes=3040, counter="NEW")
    fleet.fit(ada, 0, 60, "failed", removed_visit=fleet.visit(ada, 60.5), fitted_visit=fleet.visit(ada, 0.5))
    assert rows_of(fleet.lives(100)) == [(0, 5000, "failed", None, 1)]


def test_hours_stay_as_they_were_read() -> None:
    fleet = SmallFleet(clock="hours")
    ada = fleet.module("ADA", fleet.site())
    fleet.fit(ada, 0, 30, "failed", hours_at_fit=100.1, hours_at_removal=150.3)
    fleet.fit(ada, 0, 30, "failed", hours_at_fit=0.0, hours_at_removal=50.2)
    assert rows_of(fleet.lives(100)) == [(0, 50.2, "failed", None, 2)]


def test_a_late_entry_on_strokes_is_the_count_when_records_began(fleet: SmallFleet) -> None:
    ada = fleet.module("ADA", fleet.site(records_from=None), records_from=None)
    ada.records_from = "2024-02-20"  # day 50
    ada.save()
    fleet.read(ada, 0.0, strokes=0)
    fleet.read(ada, 80.0, strokes=8000)
    fleet.fit(ada, 0, 60, "failed", fitted_visit=fleet.visit(ada, 0.0), removed_visit=fleet.visit(ada, 60.0))
    assert rows_of(fleet.lives(100)) == [(5000, 6000, "failed", None, 1)]


def test_another_clock_than_the_components_own_is_named(fleet: SmallFleet) -> None:
    fleet.fit(fleet.module("ADA", fleet.site()), 0, 61, "failed")
    found = fleet.lives(100, clock="days")
    assert rows_of(found) == [(0, 61, "failed", None, 1)]
    assert "not this component's own clock" in found.warnings[0]
