"""What was known on a day: each sort of record that came late, worked by hand; as-of day and known day are both 100."""

from __future__ import annotations

import pytest

from tests.reliability.small_fleet import SmallFleet, day, left_out, rows_of

pytestmark = pytest.mark.django_db


@pytest.fixture
def fleet() -> SmallFleet:
    return SmallFleet()


def test_a_visit_that_became_known_later_proves_nothing_yet(fleet: SmallFleet) -> None:
    ada = fleet.module("ADA", fleet.site("WEIR", reports_at_once=False))
    fleet.fit(ada, 0)
    fleet.visit(ada, 40.4)
    fleet.visit(ada, 90.4, known=101)
    assert rows_of(fleet.lives(100)) == [(0, 90, "running", None, 1)]
    assert rows_of(fleet.lives(100, known_on=100)) == [(0, 40, "running", None, 1)]
    assert rows_of(fleet.lives(100, known_on=101)) == [(0, 90, "running", None, 1)]


def test_a_reading_that_became_known_later_is_not_read_yet() -> None:
    fleet = SmallFleet(clock="strokes")
    ada = fleet.module("ADA", fleet.site())
    fleet.fit(ada, 0)
    for at, strokes, known in ((0.5, 0, 0), (50.5, 5000, 50), (80.5, 9000, 101)):
        fleet.read(ada, at, known=known, strokes=strokes)
    assert rows_of(fleet.lives(100)) == [(0, 9000, "running", None, 1)]
    assert rows_of(fleet.lives(100, known_on=100)) == [(0, 5000, "running", None, 1)]


def test_a_stop_that_became_known_later_takes_no_time_yet(fleet: SmallFleet) -> None:
    ada = fleet.module("ADA", fleet.site())
    fleet.fit(ada, 0)
    fleet.stop(ada, 50.0, 60.0)
    ada.stops.update(known_on=day(101))
    assert rows_of(fleet.lives(100)) == [(0, 90, "running", None, 1)]
    assert rows_of(fleet.lives(100, known_on=100)) == [(0, 100, "running", None, 1)]


def test_a_stop_that_ended_later_lasts(fleet: SmallFleet) -> None:
    ada = fleet.module("ADA", fleet.site())
    fleet.fit(ada, 0)
    fleet.stop(ada, 50.0, 120.0)
    assert rows_of(fleet.lives(100, known_on=100)) == [(0, 50, "running", None, 1)]


def test_a_removal_that_became_known_later_has_not_happened_yet(fleet: SmallFleet) -> None:
    lock = fleet.site()
    fleet.fit(fleet.module("ADA", lock), 0, 90, "failed", known=101)
    fleet.fit(fleet.module("BEN", lock), 0, 80, "planned", known=101)
    assert rows_of(fleet.lives(79, known_on=100)) == [(0, 79, "running", None, 2)]
    assert rows_of(fleet.lives(100, known_on=100)) == [(0, 100, "running", None, 2)]


def test_the_visit_tells_when_a_removal_became_known(fleet: SmallFleet) -> None:
    ada = fleet.module("ADA", fleet.site())
    fleet.fit(ada, 0, 90, "planned", removed_visit=fleet.visit(ada, 90.4, known=101))
    assert rows_of(fleet.lives(100, known_on=100)) == [(0, 100, "running", None, 1)]


def test_a_fitting_that_became_known_later_is_not_there_yet(fleet: SmallFleet) -> None:
    ada = fleet.module("ADA", fleet.site())
    fleet.fit(ada, 70, fitted_known_on=day(101))
    assert fleet.lives(100, known_on=100).lifetimes is None
    assert left_out(fleet.lives(100, known_on=100)) == {}
    assert rows_of(fleet.lives(100)) == [(0, 30, "running", None, 1)]


def test_the_lag_is_learned_from_what_was_known(fleet: SmallFleet) -> None:
    lock = fleet.site()
    fleet.fit(fleet.module("ADA", lock), 0, 30, "failed", known=33)
    fleet.fit(fleet.module("BEN", lock), 0, 60, "failed", known=101)
    fleet.fit(fleet.module("CY", lock), 0)
    assert rows_of(fleet.lives(100, known_on=100)) == [(0, 30, "failed", None, 1), (0, 97, "running", None, 2)]


def test_a_move_after_the_day_is_not_known_yet(fleet: SmallFleet) -> None:
    ada = fleet.module("ADA", fleet.site(), scrapped_on=day(140))
    ada.placements.update(to_on=day(120))
    fleet.fit(ada, 0)
    assert rows_of(fleet.lives(100, known_on=100)) == [(0, 100, "running", None, 1)]
