"""What ran on a day as known by then: each sort of record that came late by hand, and on random fleets."""

from __future__ import annotations

import datetime as dt
import random
from typing import Any

import pytest

from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.models import Component, Fitting, Part, Placement, Reading, Stop, Visit
from reliability.forecasts.duty import duty
from reliability.forecasts.learned import _learn
from reliability.forecasts.next_quarter import forecast_document, question_of
from reliability.forecasts.taken_along import triggers
from reliability.lives_as_known import shared_records
from reliability.running_parts import Replacements, RunningParts, RunningRow, running_parts
from tests.reliability.small_fleet import SmallFleet, day, instant, rows_of
from tests.reliability.told_fleet import tell_module, write_fleet

pytestmark = pytest.mark.django_db
AS_OF = 200


@pytest.fixture
def fleet() -> SmallFleet:
    return SmallFleet()


def then(fleet: SmallFleet, as_of: int = AS_OF, known_on: int | None = None) -> RunningParts:
    rebuild_clocks()
    return running_parts(fleet.component, as_of=day(as_of), known_on=day(known_on or as_of))


def ages(fleet: SmallFleet, known_on: int = AS_OF) -> list[float]:
    return [row.age for row in then(fleet, known_on=known_on).rows]


def test_a_removal_learned_of_later_still_runs(fleet: SmallFleet) -> None:
    fleet.fit(fleet.module("ADA", fleet.site()), 120, 190, "failed", known=201)
    assert ages(fleet) == [80.0]
    assert ages(fleet, known_on=201) == []


def test_a_fitting_learned_of_later_is_not_there(fleet: SmallFleet) -> None:
    fleet.fit(fleet.module("ADA", fleet.site()), 150, fitted_known_on=day(201))
    assert ages(fleet) == []
    assert ages(fleet, known_on=201) == [50.0]


def test_the_visit_tells_when_a_change_became_known(fleet: SmallFleet) -> None:
    ada = fleet.module("ADA", fleet.site())
    late = fleet.visit(ada, 190.4, known=205)
    fleet.fit(ada, 100, 190, "failed", removed_visit=late)
    fleet.fit(ada, 190, fitted_visit=late)
    assert ages(fleet) == [100.0]
    assert ages(fleet, known_on=205) == [10.0]


def test_a_stop_learned_of_later_takes_no_time_and_one_that_ended_later_lasts(fleet: SmallFleet) -> None:
    lock = fleet.site()
    ada, ben = fleet.module("ADA", lock), fleet.module("BEN", lock)
    fleet.fit(ada, 100)
    fleet.fit(ben, 100)
    fleet.stop(ada, 150, 170)
    ada.stops.update(known_on=day(201))
    fleet.stop(ben, 150, 210)
    assert ages(fleet) == [50.0, 100.0]
    assert running_parts(fleet.component, as_of=day(AS_OF)).rows[0].age == 50.0
    assert sorted(ages(fleet, known_on=220)) == [50.0, 80.0]


def test_a_move_after_the_day_has_not_happened_yet(fleet: SmallFleet) -> None:
    ada = fleet.module("ADA", fleet.site(), scrapped_on=day(260))
    ada.placements.update(to_on=day(210))
    Placement.objects.create(module=ada, site=fleet.site("WEIR"), from_on=day(210))
    fleet.fit(ada, 120)
    assert then(fleet).rows == [RunningRow(80.0, 1.0, "N1", "N1", "LOCK", "CARRIAGE", 1)]


def test_a_reading_learned_of_later_moves_no_stroke() -> None:
    fleet = SmallFleet("strokes")
    ada = fleet.module("ADA", fleet.site())
    fleet.fit(ada, 100)
    for at, strokes, known in ((100, 0, 100), (150, 25_000, 150), (199, 99_000, 205)):
        fleet.read(ada, at, known=known, strokes=strokes)
    (row,) = then(fleet).rows
    assert row.age == pytest.approx(50_000, rel=0.01)
    assert row.a_day == pytest.approx(500, rel=0.02)
    (row,) = then(fleet, known_on=205).rows
    assert row.age > 99_000


def test_a_design_that_nobody_had_fitted_follows_nobody(fleet: SmallFleet) -> None:
    fleet.n2.supersedes = fleet.n1
    fleet.n2.save()
    site = fleet.site()
    fleet.fit(fleet.module("ADA", site), 100)
    fleet.fit(fleet.module("BEN", site), 190, part=fleet.n2, fitted_known_on=day(203))
    rebuild_clocks()
    assert Replacements(fleet.component, day(AS_OF), day(AS_OF)).of("N1", "LOCK") == "N1"
    assert Replacements(fleet.component, day(AS_OF), day(203)).of("N1", "LOCK") == "N2"


def test_what_a_site_fitted_lately_stays_with_the_site_where_the_module_stood(fleet: SmallFleet) -> None:
    fleet.n2.supersedes = fleet.n1
    fleet.n2.save()
    old, new = fleet.site("OLD"), fleet.site("NEW")
    fleet.fit(fleet.module("ADA", new), 50, part=fleet.n2)
    for number in range(3):
        module = fleet.module(f"M-{number}", old)
        fleet.fit(module, 180)
        module.placements.update(to_on=day(220))
        Placement.objects.create(module=module, site=new, from_on=day(220))
    rebuild_clocks()
    assert Replacements(fleet.component, day(AS_OF), day(AS_OF)).lately["OLD"] == {"N1": 3}


def test_it_agrees_with_the_lives_of_that_day(fleet: SmallFleet) -> None:
    """Sites that report at once without a lag: what runs is what the life data count as running, as old."""
    site = fleet.site()
    for number, (fitted, removed, known) in enumerate(
        ((10, None, None), (20, 150, 150), (30, 150, 210), (40, 220, 220))
    ):
        fleet.fit(fleet.module(f"M-{number}", site), fitted, removed, "failed" if removed else "", known=known)
    running = [row for row in rows_of(fleet.lives(AS_OF, known_on=AS_OF)) if row[2] == "running"]
    found = then(fleet).rows
    assert sorted(row.age for row in found) == sorted(age for _, age, *_ in running) == [160.0, 170.0, 190.0]


@pytest.mark.parametrize("clock", ["days", "strokes"])
@pytest.mark.parametrize("seed", range(3))
def test_nothing_learned_later_leaks_into_lives_or_what_ran(seed: int, clock: str) -> None:
    """Random fleets: the answers of day 200 with all records, and with those alone that were known by then."""
    rng, fleet = random.Random(seed), SmallFleet(clock)
    write_fleet(fleet, [tell_module(rng, f"M-{number}") for number in range(12)])
    everything = answers(fleet)
    forget_later(AS_OF)
    assert answers(fleet) == everything


def answers(fleet: SmallFleet) -> Any:
    rebuild_clocks()
    with shared_records():
        found = running_parts(fleet.component, as_of=day(AS_OF), known_on=day(AS_OF))
        lived = fleet.lives(AS_OF, known_on=AS_OF, by="part")
    out = [row for row in lived.left_out if row.reason != "struck out"]
    return found, rows_of(lived), [(row.reason, row.count) for row in out], lived.warnings


def forget_later(known_on: int) -> None:
    """The book as it was on that day, from the same stories: what came later is taken out again."""
    last = day(known_on)
    for model in (Stop, Visit, Reading):
        Fitting.objects.filter(fitted_visit__known_on__gt=last).update(fitted_visit=None)
        model.objects.filter(known_on__gt=last).delete()
    Stop.objects.filter(running_at__gte=instant(known_on + 1)).update(running_at=None)
    Fitting.objects.filter(fitted_known_on__gt=last).delete()
    Fitting.objects.filter(removed_known_on__gt=last).update(
        removed_on=None, reason="", mode=None, failed_on=None, last_good_on=None, removed_known_on=None
    )
    Placement.objects.filter(from_on__gt=last).delete()
    Placement.objects.filter(to_on__gt=last).update(to_on=None)


def test_shared_records_give_the_same_and_end_with_the_block(fleet: SmallFleet) -> None:
    ada = fleet.module("ADA", fleet.site())
    fleet.fit(ada, 120)
    with shared_records():
        assert ages(fleet) == [80.0]
        Stop.objects.create(module=ada, stopped_at=instant(150), running_at=instant(170), known_on=day(150))
        assert ages(fleet) == [80.0]  # as loaded
        assert ages(fleet, known_on=201) == [60.0]  # another day is loaded anew
    assert ages(fleet) == [60.0]
    assert Part.objects.count() == 2


@pytest.mark.parametrize("clock", ["days", "strokes"])
@pytest.mark.parametrize("seed", range(2))
def test_nothing_learned_later_leaks_into_a_forecast(seed: int, clock: str) -> None:
    """The same for all that a forecast reads: lives, visits, stops, use and its season, removals for other reasons."""
    rng, fleet = random.Random(40 + seed), SmallFleet(clock)
    write_fleet(fleet, [tell_module(rng, f"M-{number}") for number in range(24)])
    for number, reading in enumerate(Reading.objects.order_by("pk")):
        if number % 4 == 0:
            Reading.objects.filter(pk=reading.pk).update(known_on=reading.known_on + dt.timedelta(days=20))
    Stop.objects.filter(pk__in=list(Stop.objects.order_by("pk").values_list("pk", flat=True)[::3])).update(
        known_on=day(230)
    )
    everything = forecast_then(fleet)
    forget_later(AS_OF)
    assert forecast_then(fleet) == everything


def test_a_cause_learned_of_later_took_nothing_along_yet(fleet: SmallFleet) -> None:
    screw = Part.objects.create(code="S1", component=Component.objects.create(code="SCREW", clock="days"))
    site = fleet.site()
    for number in range(4):
        module = fleet.module(f"M-{number}", site)
        cause = fleet.fit(module, 10, 190, "failed", part=screw, known=190 if number else 205)
        fleet.fit(module, 10, 190, "taken with another", known=190, caused_by=cause)
        fleet.fit(module, 10, 190, "taken with another", known=190, caused_by=cause)
    rebuild_clocks()
    (then_known,) = triggers(fleet.component, day(AS_OF), day(AS_OF))
    (now_known,) = triggers(fleet.component, day(AS_OF), None)
    assert (then_known.taken, now_known.taken) == ([0, 3], [0, 4])


def forecast_then(fleet: SmallFleet) -> Any:
    rebuild_clocks()
    asked = question_of(fleet.component, begin=day(AS_OF + 1), days=28, as_of=day(AS_OF), known_on=day(AS_OF))
    return _learn(fleet.component, day(AS_OF), day(AS_OF)), forecast_document(asked)


def test_use_is_learned_from_the_readings_known_by_then() -> None:
    """Readings every week; those of the last eleven weeks before the day came in after it."""
    fleet, rng = SmallFleet("strokes"), random.Random(8)
    for place in range(3):
        site = fleet.site(f"S{place}")
        for number in range(3):
            module = fleet.module(f"M-{place}-{number}", site)
            strokes = 0
            for week in range(130):
                at = 7 * week + 3
                late = 820 < at <= 900
                fleet.read(module, at + 0.5, known=905 if late else at, strokes=strokes)
                strokes += round(rng.uniform(2000, 2400) * (3 if late else 1))
    rebuild_clocks()
    then_known = duty("strokes", day(900), day(900))
    assert then_known != duty("strokes", day(900), day(905))
    Reading.objects.filter(known_on__gt=day(900)).delete()
    rebuild_clocks()
    assert duty("strokes", day(900), day(900)) == then_known
