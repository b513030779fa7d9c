"""Each row of the rules “from records to lifetimes” on a part or two worked by hand. Ages in days unless said."""

from __future__ import annotations

import pytest

from tests.reliability.small_fleet import SmallFleet, day, left_out, rows_of

pytestmark = pytest.mark.django_db


@pytest.fixture
def fleet() -> SmallFleet:
    return SmallFleet()


def test_a_failure_counts_at_the_day_it_failed_and_else_at_its_removal(fleet: SmallFleet) -> None:
    lock = fleet.site()
    fleet.fit(fleet.module("ADA", lock), 0, 61, "failed")
    fleet.fit(fleet.module("BEN", lock), 0, 65, "failed", failed=58, known=58)
    assert rows_of(fleet.lives(100)) == [(0, 58, "failed", None, 1), (0, 61, "failed", None, 1)]


def test_a_last_good_day_makes_an_interval_where_it_is_earlier(fleet: SmallFleet) -> None:
    lock = fleet.site()
    fleet.fit(fleet.module("ADA", lock), 0, 61, "failed", last_good=47)
    fleet.fit(fleet.module("BEN", lock), 0, 61, "failed", last_good=61)
    assert rows_of(fleet.lives(100)) == [(0, 61, "failed", 47, 1), (0, 61, "failed", None, 1)]


def test_worn_to_limit_is_a_failure_unless_it_is_switched_off_and_then_it_warns(fleet: SmallFleet) -> None:
    fleet.fit(fleet.module("ADA", fleet.site()), 0, 40, "worn to limit")
    counted = fleet.lives(100)
    assert rows_of(counted) == [(0, 40, "failed", None, 1)]
    assert counted.warnings == []
    switched = fleet.lives(100, worn_is_failure=False)
    assert rows_of(switched) == [(0, 40, "worn", None, 1)]
    assert not switched.lifetimes.observed.any()
    assert "too long" in switched.warnings[0]


@pytest.mark.parametrize("reason", ["planned", "taken with another", "upgrade", "module withdrawn"])
def test_other_reasons_withdraw_the_part_at_its_age(fleet: SmallFleet, reason: str) -> None:
    fleet.fit(fleet.module("ADA", fleet.site()), 0, 40, reason)
    assert rows_of(fleet.lives(100)) == [(0, 40, "withdrawn", None, 1)]


def test_many_removals_of_unknown_reason_are_shown_both_ways(fleet: SmallFleet) -> None:
    lock = fleet.site()
    for number in range(18):
        fleet.fit(fleet.module(f"ADA-{number}", lock), 0, 50 + number, "failed")
    fleet.fit(fleet.module("BEN", lock), 0, 40, "not known")
    fewer = fleet.lives(100)  # 1 of 19 removals: 5.3 %
    assert "1 of 19" in fewer.warnings[0]
    assert (fewer.lifetimes.failures, fewer.if_not_known_failed.failures) == (18, 19)
    fleet.fit(fleet.module("CY", lock), 0, 41, "failed")
    enough = fleet.lives(100)  # 1 of 20: 5 %
    assert enough.if_not_known_failed is None
    assert enough.warnings == []


def test_a_running_part_counts_to_the_as_of_day_where_failures_are_reported_at_once(fleet: SmallFleet) -> None:
    fleet.fit(fleet.module("ADA", fleet.site()), 10)
    assert rows_of(fleet.lives(100)) == [(0, 90, "running", None, 1)]


def test_the_reporting_lag_cuts_running_parts_and_late_failures_alike(fleet: SmallFleet) -> None:
    lock = fleet.site()
    for number in range(20):  # nineteen known at once, one of twenty after five days: the 95 % quantile is 0
        late = 5 if number == 0 else 0
        fleet.fit(fleet.module(f"ADA-{number}", lock), 0, 30, "failed", known=30 + late)
    fleet.fit(fleet.module("BEN", lock), 0, 97, "failed", known=97)
    fleet.fit(fleet.module("CY", lock), 0)
    fleet.fit(fleet.module("DORA", lock), 98)
    at_once = rows_of(fleet.lives(100))
    assert (0, 97, "failed", None, 1) in at_once
    assert (0, 100, "running", None, 1) in at_once
    for number in range(2):  # now three of 23 came five days late
        fleet.fit(fleet.module(f"EVE-{number}", lock), 0, 31, "failed", known=36)
    cut = fleet.lives(100)
    assert rows_of(cut) == [(0, 30, "failed", None, 20), (0, 31, "failed", None, 2), (0, 95, "running", None, 2)]
    assert left_out(cut) == {"fitted after the last day that counts at its site": 1}


def test_one_late_failure_in_ten_is_more_than_five_in_a_hundred(fleet: SmallFleet) -> None:
    lock = fleet.site()
    for number in range(10):
        fleet.fit(fleet.module(f"ADA-{number}", lock), 0, 30, "failed", known=35 if number == 0 else 30)
    fleet.fit(fleet.module("BEN", lock), 0)
    assert rows_of(fleet.lives(100)) == [(0, 30, "failed", None, 10), (0, 95, "running", None, 1)]


def test_without_failures_the_visits_tell_the_lag(fleet: SmallFleet) -> None:
    ada = fleet.module("ADA", fleet.site())
    fleet.fit(ada, 0)
    fleet.visit(ada, 20.4, known=27)
    assert rows_of(fleet.lives(100)) == [(0, 93, "running", None, 1)]


def test_elsewhere_a_running_part_counts_to_the_last_visit_of_its_own_module(fleet: SmallFleet) -> None:
    weir = fleet.site("WEIR", reports_at_once=False)
    ada, ben = fleet.module("ADA", weir), fleet.module("BEN", weir)
    fleet.fit(ada, 0)
    fleet.fit(ben, 0)
    fleet.visit(ada, 40.4)
    fleet.visit(ben, 70.4)
    assert rows_of(fleet.lives(100)) == [(0, 40, "running", None, 1), (0, 70, "running", None, 1)]


def test_a_reading_proves_a_part_good_only_where_it_advanced(fleet: SmallFleet) -> None:
    weir = fleet.site("WEIR", reports_at_once=False)
    ada = fleet.module("ADA", weir)
    fleet.fit(ada, 0)
    fleet.read(ada, 10.4, strokes=1000)
    fleet.read(ada, 50.4, strokes=3000)
    fleet.read(ada, 80.4, strokes=3000)
    assert rows_of(fleet.lives(100)) == [(0, 50, "running", None, 1)]


def test_elsewhere_a_failure_lies_between_the_previous_look_and_the_day_it_was_found(fleet: SmallFleet) -> None:
    ada = fleet.module("ADA", fleet.site("WEIR", reports_at_once=False))
    fleet.fit(ada, 0, 61, "failed")
    fleet.fit(ada, 0, 61, "failed", last_good=50)
    fleet.visit(ada, 33.4)
    fleet.visit(ada, 61.4)
    assert rows_of(fleet.lives(100)) == [(0, 61, "failed", 33, 1), (0, 61, "failed", 50, 1)]


def test_elsewhere_a_first_failure_lies_anywhere_since_the_fitting(fleet: SmallFleet) -> None:
    ada = fleet.module("ADA", fleet.site("WEIR", reports_at_once=False))
    fleet.fit(ada, 0, 61, "failed")
    assert rows_of(fleet.lives(100)) == [(0, 61, "failed", 0, 1)]


def test_a_failure_found_after_the_as_of_day_still_runs_at_the_last_look(fleet: SmallFleet) -> None:
    ada = fleet.module("ADA", fleet.site("WEIR", reports_at_once=False))
    fleet.fit(ada, 0, 120, "failed", failed=90)
    fleet.visit(ada, 33.4)
    fleet.visit(ada, 120.4)
    assert rows_of(fleet.lives(100)) == [(0, 33, "running", None, 1)]
    assert rows_of(fleet.lives(120)) == [(0, 90, "failed", 33, 1)]


def test_a_site_of_which_nobody_said_it_counts_to_the_last_look_and_warns(fleet: SmallFleet) -> None:
    ada = fleet.module("ADA", fleet.site("WEIR", reports_at_once=None, name="Old weir"))
    fleet.fit(ada, 0)
    fleet.visit(ada, 33.4)
    found = fleet.lives(100)
    assert rows_of(found) == [(0, 33, "running", None, 1)]
    assert "Old weir" in found.warnings[0]


@pytest.mark.parametrize("on_the_module", [False, True])
def test_a_part_from_before_the_records_enters_at_its_age_on_that_day(fleet: SmallFleet, on_the_module: bool) -> None:
    began = {"records_from": day(50)}
    lock = fleet.site(**({} if on_the_module else began))
    ada = fleet.module("ADA", lock, **(began if on_the_module else {}))
    fleet.fit(ada, 0, 80, "failed")
    fleet.fit(ada, 60, 90, "failed")
    fleet.fit(ada, 0, 45, "failed")  # such a removal was written down by chance
    found = fleet.lives(100)
    assert rows_of(found) == [(0, 30, "failed", None, 1), (50, 80, "failed", None, 1)]
    assert left_out(found) == {"ended before records were kept": 1}


def test_parts_whose_fitting_day_is_not_known_are_left_out_and_counted(fleet: SmallFleet) -> None:
    lock = fleet.site()
    fleet.fit(fleet.module("ADA", lock), None, 80, "failed")
    fleet.fit(fleet.module("BEN", lock), None)
    found = fleet.lives(100)
    assert found.lifetimes is None
    assert left_out(found) == {"fitting day not known": 2}


def test_a_used_part_enters_at_the_age_it_had(fleet: SmallFleet) -> None:
    lock = fleet.site()
    fleet.fit(fleet.module("ADA", lock), 0, 30, "failed", age_at_fit=25)
    fleet.fit(fleet.module("BEN", lock), 80, age_at_fit=10)
    assert rows_of(fleet.lives(100)) == [(10, 30, "running", None, 1), (25, 55, "failed", None, 1)]


def test_the_age_of_a_used_part_is_not_known_on_another_clock(fleet: SmallFleet) -> None:
    fleet.fit(fleet.module("ADA", fleet.site(strokes_per_day=10)), 0, 30, "failed", age_at_fit=25)
    found = fleet.lives(100, clock="strokes")
    assert found.lifetimes is None
    assert left_out(found) == {"used part whose age on this clock is not known": 1}


def test_stopped_or_at_a_depot_a_part_does_not_age(fleet: SmallFleet) -> None:
    lock = fleet.site()
    ada, ben = fleet.module("ADA", lock), fleet.module("BEN", None)
    fleet.stop(ada, 10.0, 30.0)
    fleet.fit(ada, 0, 61, "failed")
    depot = fleet.site("DEPOT", kind="depot")
    for site, since, until in ((lock, 0, 20), (depot, 20, 40), (lock, 40, None)):
        ben.placements.create(site=site, from_on=day(since), to_on=None if until is None else day(until))
    fleet.fit(ben, 0, 65, "planned")
    assert rows_of(fleet.lives(100)) == [(0, 41, "failed", None, 1), (0, 45, "withdrawn", None, 1)]


def test_a_failure_is_rounded_up_and_a_removal_down(fleet: SmallFleet) -> None:
    ada = fleet.module("ADA", fleet.site())
    fleet.stop(ada, 10.0, 10.25)
    fleet.fit(ada, 0, 61, "failed")
    fleet.fit(ada, 0, 61, "planned")
    fleet.fit(ada, 0)
    assert rows_of(fleet.lives(61)) == [
        (0, 60, "running", None, 1),
        (0, 60, "withdrawn", None, 1),
        (0, 61, "failed", None, 1),
    ]


def test_failed_on_the_day_it_was_fitted_lies_within_the_first_day(fleet: SmallFleet) -> None:
    lock = fleet.site()
    fleet.fit(fleet.module("ADA", lock), 5, 5, "failed")
    fleet.fit(fleet.module("BEN", lock), 5, 5, "planned")
    found = fleet.lives(100)
    assert rows_of(found) == [(0, 1, "failed", 0, 1)]
    assert left_out(found) == {"nothing observed yet: age 0": 1}


def test_struck_out_and_test_stands_are_left_out_and_counted(fleet: SmallFleet) -> None:
    rig = fleet.module("RIG-1", fleet.site("RIG", kind="rig"))
    fleet.fit(rig, 0, 20, "failed")
    fleet.fit(fleet.module("ADA", fleet.site()), 0, 30, "failed", struck_out="wrong module")
    found = fleet.lives(100)
    assert found.lifetimes is None
    assert left_out(found) == {"on a test stand": 1, "struck out": 1}
    assert {row.reason: row.query.get().code for row in found.left_out} == {
        "on a test stand": "F-1",
        "struck out": "F-2",
    }
    assert rows_of(fleet.lives(100, with_rigs=True)) == [(0, 20, "failed", None, 1)]


def test_other_modes_count_as_removals_in_good_order_and_say_so(fleet: SmallFleet) -> None:
    lock = fleet.site()
    fleet.fit(fleet.module("ADA", lock), 0, 30, "failed", mode=fleet.worn)
    fleet.fit(fleet.module("BEN", lock), 0, 40, "failed", mode=fleet.stripped)
    fleet.fit(fleet.module("CY", lock), 0, 50, "failed")
    found = fleet.lives(100, modes=["WORN"])
    assert rows_of(found) == [
        (0, 30, "failed", None, 1),
        (0, 40, "other mode", None, 1),
        (0, 50, "other mode", None, 1),
    ]
    assert found.warnings[0].startswith("If only this mode acted (WORN)")
    assert "1 part failed without a mode" in found.warnings[0]


def test_what_happened_after_the_as_of_day_does_not_count(fleet: SmallFleet) -> None:
    lock = fleet.site()
    fleet.fit(fleet.module("ADA", lock), 0, 61, "failed")
    fleet.fit(fleet.module("BEN", lock), 50)
    assert rows_of(fleet.lives(40)) == [(0, 40, "running", None, 1)]


def test_equal_rows_are_grouped(fleet: SmallFleet) -> None:
    lock = fleet.site()
    for number in range(7):
        fleet.fit(fleet.module(f"ADA-{number}", lock), number, number + 61, "failed")
    found = fleet.lives(100)
    assert (len(found.lifetimes), found.lifetimes.count) == (1, 7)


def test_a_module_that_moved_counts_at_the_site_of_the_as_of_day(fleet: SmallFleet) -> None:
    lock, weir = fleet.site(), fleet.site("WEIR", reports_at_once=False)
    ada = fleet.module("ADA", None)
    ada.placements.create(site=lock, from_on=day(0), to_on=day(50))
    ada.placements.create(site=weir, from_on=day(50))
    fleet.fit(ada, 0)
    fleet.visit(ada, 70.4)
    assert fleet.lives(40).lifetimes.sites.tolist() == ["LOCK"]
    now = fleet.lives(100)
    assert now.lifetimes.sites.tolist() == ["WEIR"]
    assert rows_of(now) == [(0, 70, "running", None, 1)]
