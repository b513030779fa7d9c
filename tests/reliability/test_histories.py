"""Failures of a position in their order, the duty of modules, and second labels of lives: cast of one small fleet."""

from __future__ import annotations

import pytest

from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.models import Fitting, Position
from reliability.histories_from_fleet import module_duties, position_histories
from reliability.life_question import asked_of
from tests.reliability.small_fleet import SmallFleet, day

pytestmark = pytest.mark.django_db


@pytest.fixture
def fleet() -> SmallFleet:
    return SmallFleet()


def in_one_position(fittings: list[Fitting]) -> None:
    """SmallFleet gives each story a position of its own; these follow each other in one."""
    first = Position.objects.get(pk=fittings[0].position_id)
    for fitting in fittings[1:]:
        fitting.position = first
        fitting.save()


def histories(fleet: SmallFleet, as_of: int, **choices: object) -> list[tuple[tuple[float, ...], float, int, str]]:
    rebuild_clocks()
    found = position_histories("NUT", as_of=day(as_of), **choices)
    return [(each.failures, each.end, each.other_removals, each.site) for each in found]


def test_a_position_ages_by_the_lives_of_its_parts(fleet: SmallFleet) -> None:
    """Three parts one after the other, a week empty between two of them: the empty days are no age."""
    ada = fleet.module("ADA", fleet.site())
    in_one_position(
        [fleet.fit(ada, 0, 30, "failed"), fleet.fit(ada, 37, 57, "planned"), fleet.fit(ada, 57, 67, "failed")]
    )
    fleet.fit(fleet.module("BEN", fleet.site("MILL")), 20)
    assert histories(fleet, 100) == [((30.0, 60.0), 60.0, 1, "LOCK"), ((), 80.0, 0, "MILL")]


def test_a_position_begins_with_a_new_part(fleet: SmallFleet) -> None:
    """What was there before records began, was fitted used or on an unknown day does not start a history."""
    late = fleet.site("LATE", records_from=day(20))
    ada = fleet.module("ADA", late)
    in_one_position([fleet.fit(ada, 0, 50, "failed"), fleet.fit(ada, 50, 61, "failed"), fleet.fit(ada, 61)])
    ben = fleet.module("BEN", fleet.site())
    in_one_position([fleet.fit(ben, None, 50, "failed"), fleet.fit(ben, 50, 90, "failed")])
    cy = fleet.module("CY", fleet.site("MILL"))
    in_one_position([fleet.fit(cy, 0, 10, "failed"), fleet.fit(cy, 10, 20, "failed", age_at_fit=15), fleet.fit(cy, 20)])
    assert histories(fleet, 100) == [
        ((11.0,), 50.0, 0, "LATE"),
        ((40.0,), 40.0, 0, "LOCK"),
        ((10.0,), 10.0, 0, "MILL"),
        ((), 80.0, 0, "MILL"),
    ]


def test_the_as_of_day_cuts_and_struck_out_and_rig_rows_count_for_nothing(fleet: SmallFleet) -> None:
    ada = fleet.module("ADA", fleet.site())
    in_one_position([fleet.fit(ada, 0, 30, "failed"), fleet.fit(ada, 30, 70, "failed")])
    fleet.fit(ada, 0, 10, "failed", struck_out="twice")
    fleet.fit(fleet.module("RIG-1", fleet.site("RIG", kind="rig")), 0, 10, "failed")
    assert histories(fleet, 50) == [((30.0,), 50.0, 0, "LOCK")]
    assert histories(fleet, 50, with_rigs=True)[1] == ((10.0,), 10.0, 0, "RIG")


def test_duty_is_what_the_counter_did_in_service(fleet: SmallFleet) -> None:
    ada, ben = fleet.module("ADA", fleet.site()), fleet.module("BEN", fleet.site("MILL", strokes_per_day=40))
    fleet.fit(ada, 0)
    fleet.fit(ben, 0)
    fleet.read(ada, 0.0, strokes=0)
    fleet.read(ada, 50.0, strokes=10_000)
    fleet.read(ada, 150.0, strokes=500_000)  # after the as-of day
    fleet.stop(ada, 20.0, 30.0)
    rebuild_clocks()
    duties = module_duties(asked_of("NUT", as_of=day(100)))
    assert duties[str(ada.pk)].a_day == pytest.approx(10_000 / 40)  # ten of the fifty days it stood still
    assert duties[str(ada.pk)].measured
    assert duties[str(ben.pk)].a_day == pytest.approx(40)
    assert not duties[str(ben.pk)].measured


@pytest.mark.parametrize("known_on", [None, 90])
def test_second_labels_keep_every_life(fleet: SmallFleet, known_on: int | None) -> None:
    lock = fleet.site()
    ada, ben = fleet.module("ADA", lock), fleet.module("BEN", lock)
    fleet.fit(ada, 0, 30, "failed", mode=fleet.worn, lot="A")
    fleet.fit(ben, 0, 30, "failed", mode=fleet.stripped, lot="B")
    fleet.fit(ben, 0, 30, "planned", mode=fleet.worn, lot="B")
    for also, expected in (
        ("mode", ["", "STRIPPED", "WORN"]),
        ("lot", ["A", "B", "B"]),
        ("module", sorted([str(ada.pk), str(ben.pk), str(ben.pk)])),
    ):
        found = fleet.lives(90, also=also, known_on=known_on)
        told = [
            label for label, count in zip(found.also, found.lifetimes.weights, strict=True) for _ in range(int(count))
        ]
        assert sorted(told) == expected
        assert found.lifetimes.count == 3
    (failed,) = [label for label, state in zip(found.also, found.states, strict=True) if state == "withdrawn"]
    assert failed == str(ben.pk)
