"""Which parts run on a day, how old they are and how fast they age: worked by hand, one module a story."""

from __future__ import annotations

import datetime as dt

import pytest
from django.utils import timezone

from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.models import Part
from reliability.forecasts.modules_ahead import NEVER
from reliability.running_parts import Replacements, RunningRow, chains_of, running_parts
from tests.reliability.small_fleet import DAY_0, SmallFleet, day

pytestmark = pytest.mark.django_db
AS_OF = 200


@pytest.fixture
def fleet() -> SmallFleet:
    return SmallFleet()


def rows(fleet: SmallFleet, as_of: int = AS_OF, **choices: list[str]) -> list[RunningRow]:
    rebuild_clocks()
    return running_parts(fleet.component, as_of=day(as_of), **choices).rows


def test_a_part_is_as_old_as_the_days_since_it_was_fitted(fleet: SmallFleet) -> None:
    fleet.fit(fleet.module("M-1", fleet.site()), 120)
    assert rows(fleet) == [RunningRow(80.0, 1.0, "N1", "N1", "LOCK", "CARRIAGE", 1)]


def test_equal_parts_share_a_row_and_other_sites_do_not(fleet: SmallFleet) -> None:
    here, there = fleet.site(), fleet.site("WEIR")
    for tag, site in (("M-1", here), ("M-2", here), ("M-3", there)):
        fleet.fit(fleet.module(tag, site), 120)
    assert [(row.site, row.count) for row in rows(fleet)] == [("LOCK", 2), ("WEIR", 1)]
    assert [row.site for row in rows(fleet, sites=["WEIR"])] == ["WEIR"]


def test_a_part_that_came_out_before_or_goes_in_later_does_not_run(fleet: SmallFleet) -> None:
    site = fleet.site()
    fleet.fit(fleet.module("M-1", site), 10, 150, "failed")
    fleet.fit(fleet.module("M-2", site), 250)
    fleet.fit(fleet.module("M-3", site), 10, 260, "failed")
    assert [row.age for row in rows(fleet)] == [190.0]


def test_a_used_part_brings_its_age_along(fleet: SmallFleet) -> None:
    fleet.fit(fleet.module("M-1", fleet.site()), 190, age_at_fit=30)
    assert [row.age for row in rows(fleet)] == [40.0]


def test_a_stop_takes_its_days_away(fleet: SmallFleet) -> None:
    module = fleet.module("M-1", fleet.site())
    fleet.fit(module, 100)
    fleet.stop(module, 150, 170)
    assert [row.age for row in rows(fleet)] == [80.0]


def test_parts_at_depots_and_on_test_stands_are_named_as_left_out(fleet: SmallFleet) -> None:
    fleet.fit(fleet.module("M-1", fleet.site("YARD", kind="depot")), 100)
    fleet.fit(fleet.module("M-2", fleet.site("TANK", kind="rig")), 100)
    fleet.fit(fleet.module("M-3", fleet.site(), scrapped_on=day(180)), 100)
    rebuild_clocks()
    found = running_parts(fleet.component, as_of=day(AS_OF))
    assert found.rows == []
    assert found.left_out == [("at a depot", 1), ("in a scrapped module", 1), ("on a test stand", 1)]


def test_a_part_of_unknown_fitting_day_has_the_age_since_records_began_at_least(fleet: SmallFleet) -> None:
    fleet.fit(fleet.module("M-1", fleet.site(records_from=day(140))), None)
    rebuild_clocks()
    found = running_parts(fleet.component, as_of=day(AS_OF))
    assert [row.age for row in found.rows] == [60.0]
    assert [row.most for row in found.rows] == [float("inf")]
    assert found.notes == ["1\u00a0part whose fitting day is not known counts with every age that it can have."]


@pytest.mark.parametrize(
    ("built", "placed", "least"),
    [
        (-50, -20, 60.0),  # nobody knows where it was for thirty days
        (-50, -50, 60.0),
        (-50, 150, 50.0),  # of its time before records began nothing is written down
    ],
)
def test_a_part_of_unknown_age_is_no_older_than_its_module(
    fleet: SmallFleet, built: int, placed: int, least: float
) -> None:
    module = fleet.module("M-1", fleet.site(records_from=day(140)), placed=placed, built_on=day(built))
    fleet.fit(module, None)
    rebuild_clocks()
    now = running_parts(fleet.component, as_of=day(AS_OF)).rows
    then = running_parts(fleet.component, as_of=day(AS_OF), known_on=day(AS_OF)).rows
    assert [(row.age, row.most) for row in now] == [(least, 250.0)]
    assert now == then


def test_strokes_before_records_count_at_the_pace_of_today() -> None:
    fleet = SmallFleet("strokes")
    module = fleet.module("M-1", fleet.site(records_from=day(140)), placed=100, built_on=day(80))
    for at in range(100, 210, 10):
        fleet.read(module, at, strokes=(at - 100) * 500)
    fleet.fit(module, None)
    rebuild_clocks()
    (row,) = running_parts(fleet.component, as_of=day(AS_OF)).rows
    assert row.age == pytest.approx(30_000, rel=0.02)
    assert row.most == pytest.approx(60_000, rel=0.02)


def test_a_module_that_stands_still_says_for_how_long(fleet: SmallFleet) -> None:
    module = fleet.module("M-1", fleet.site())
    fleet.fit(module, 100)
    fleet.stop(module, 190, None)
    assert [(row.age, row.stopped) for row in rows(fleet)] == [(90.0, 11.0)]


def test_parts_at_sites_that_wait_for_visits_know_when_they_were_seen(fleet: SmallFleet) -> None:
    here, there = fleet.module("M-1", fleet.site("WEIR", reports_at_once=False)), fleet.module("M-2", fleet.site())
    for module in (here, there):
        fleet.fit(module, 120)
        fleet.visit(module, 188)
    assert [(row.site, row.seen) for row in rows(fleet)] == [("LOCK", -1.0), ("WEIR", 12.0)]


def test_planned_days_are_followed_only_while_they_lie_ahead(fleet: SmallFleet) -> None:
    """A module leaves for the yard, another comes from it, a third is to be scrapped: all planned today."""
    today = timezone.localdate()
    now, soon = (today - DAY_0).days, today + dt.timedelta(days=20)
    yard, weir = fleet.site("YARD", kind="depot"), fleet.site("WEIR")
    going, coming, scrapped = fleet.module("M-1", weir), fleet.module("M-2", yard), fleet.module("M-3", weir)
    for module in (going, coming, scrapped):
        fleet.fit(module, now - 30)
    going.placements.update(to_on=soon)
    coming.placements.update(to_on=soon)
    coming.placements.create(site=weir, from_on=soon)
    scrapped.scrapped_on = soon
    scrapped.save()
    rebuild_clocks()
    found = running_parts(fleet.component, as_of=today)
    assert sorted((row.joins, row.leaves, row.count) for row in found.rows) == [(0.0, 20.0, 2), (20.0, NEVER, 1)]
    assert (found.count, found.left_out) == (2, [])
    earlier = running_parts(fleet.component, as_of=today - dt.timedelta(days=1))
    assert [(row.joins, row.leaves, row.count) for row in earlier.rows] == [(0.0, NEVER, 2)]


def test_strokes_come_from_readings_and_the_pace_from_the_last_of_them() -> None:
    fleet = SmallFleet("strokes")
    module = fleet.module("M-1", fleet.site())
    fleet.fit(module, 100)
    for at in (100, 150, 200):
        fleet.read(module, at, strokes=int(at * 500))
    (row,) = rows(fleet)
    assert row.age == pytest.approx(50_000, rel=0.01)
    assert row.a_day == pytest.approx(500, rel=0.02)


@pytest.mark.parametrize("known_on", [None, day(AS_OF)])
def test_a_reading_of_the_day_itself_makes_no_pace_of_a_few_hours(known_on: dt.date | None) -> None:
    """500 a day for weeks; the counter read yesterday evening and again at noon, in between nobody worked."""
    fleet = SmallFleet(clock="strokes")
    module = fleet.module("M-1", fleet.site())
    for at in (100, 120, 150, 180, 199.9):
        fleet.read(module, at, strokes=int(at * 500))
    fleet.read(module, 200.5, strokes=int(199.9 * 500))
    fleet.fit(module, 180)
    rebuild_clocks()
    (row,) = running_parts(fleet.component, as_of=day(AS_OF), known_on=known_on).rows
    assert row.a_day == pytest.approx(500, rel=0.02)
    assert row.age == pytest.approx(19.5 * 500, rel=0.05)


def test_a_module_without_readings_takes_the_pace_of_its_site() -> None:
    fleet = SmallFleet("strokes")
    site = fleet.site(strokes_per_day=400)
    module = fleet.module("M-1", site)
    fleet.fit(module, 100)
    fleet.stop(module, 190, None)
    other = fleet.module("M-2", site)
    fleet.fit(other, 100)
    rebuild_clocks()
    found = running_parts(fleet.component, as_of=day(AS_OF))
    assert {row.a_day for row in found.rows} == {400.0}


def test_the_chain_of_designs_leads_to_the_current_one(fleet: SmallFleet) -> None:
    Part.objects.create(code="N3", component=fleet.component, supersedes=fleet.n2)
    fleet.n2.supersedes = fleet.n1
    fleet.n2.save()
    Part.objects.create(code="N4", component=fleet.component, supersedes=fleet.n1, state="on trial")
    assert chains_of(fleet.component) == {"N1": ["N1", "N2", "N3"], "N2": ["N2", "N3"], "N3": ["N3"], "N4": ["N4"]}


def test_a_circle_of_superseding_parts_ends(fleet: SmallFleet) -> None:
    Part.objects.filter(pk=fleet.n1.pk).update(supersedes=fleet.n2)
    Part.objects.filter(pk=fleet.n2.pk).update(supersedes=fleet.n1)
    assert chains_of(fleet.component) == {"N1": ["N1", "N2"], "N2": ["N2", "N1"]}


def test_what_a_site_fitted_lately_goes_in_next(fleet: SmallFleet) -> None:
    """One site has gone over to the second design, another still fits the first; a third shows too little."""
    fleet.n2.supersedes = fleet.n1
    fleet.n2.save()
    sites = {code: fleet.site(code) for code in ("NEW", "OLD", "QUIET")}
    for code, part, count in (("NEW", fleet.n2, 3), ("OLD", fleet.n1, 4), ("QUIET", fleet.n1, 2)):
        for number in range(count):
            fleet.fit(fleet.module(f"{code}-{number}", sites[code]), 180, part=part)
    rebuild_clocks()
    found = Replacements(fleet.component, day(AS_OF))
    assert [found.of("N1", code) for code in ("NEW", "OLD", "QUIET", "nowhere")] == ["N2", "N1", "N2", "N2"]
    assert Replacements(fleet.component, day(AS_OF + 120)).of("N1", "OLD") == "N2"
