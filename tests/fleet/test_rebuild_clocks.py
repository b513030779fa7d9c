"""Derived rows are made again from the records: the same on every run, and only where something changed."""

from __future__ import annotations

import pytest
from django.db import connection
from django.test.utils import CaptureQueriesContext

from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.models import ClockPoint, FittingClock, Reading, Stop, Visit
from tests.reliability.small_fleet import SmallFleet, day

pytestmark = pytest.mark.django_db


@pytest.fixture
def fleet() -> SmallFleet:
    fleet = SmallFleet(clock="strokes")
    ada = fleet.module("ADA", fleet.site())
    fleet.fit(ada, 0, 40, "failed")
    fleet.fit(ada, 40)
    fleet.visit(ada, 0.4)
    fleet.visit(ada, 40.4)
    fleet.read(ada, 0.4, strokes=0)
    fleet.read(ada, 40.4, strokes=4000)
    fleet.stop(ada, 38.0, 40.4)
    rebuild_clocks()
    fleet.ada = ada  # type: ignore[attr-defined]
    return fleet


def derived() -> tuple[list[tuple[object, ...]], list[tuple[object, ...]]]:
    return list(ClockPoint.objects.order_by("pk").values_list()), list(
        FittingClock.objects.order_by("pk").values_list()
    )


def test_a_second_run_changes_nothing_and_writes_nothing(fleet: SmallFleet) -> None:
    before = derived()
    with CaptureQueriesContext(
        connection,
    ) as queries:
        rebuild_clocks([fleet.ada.pk])  # type: ignore[attr-defined]
    assert derived() == before
    assert not [query for query in queries if query["sql"].startswith(("INSERT", "UPDATE", "DELETE", "COPY"))]
    assert len(queries) <= 14


def test_the_queries_do_not_grow_with_the_number_of_modules(fleet: SmallFleet) -> None:
    with CaptureQueriesContext(connection) as one:
        rebuild_clocks()
    for number in range(5):
        module = fleet.module(f"BEN-{number}", fleet.ada.placements.get().site)  # type: ignore[attr-defined]
        fleet.fit(module, 0)
    rebuild_clocks()
    with CaptureQueriesContext(connection) as six:
        rebuild_clocks()
    assert len(six) == len(one)


def test_a_nearer_reading_moves_only_what_lies_beside_it(fleet: SmallFleet) -> None:
    kept = {point.day: point.pk for point in ClockPoint.objects.all()}
    fleet.read(fleet.ada, 50.5, strokes=6000)  # type: ignore[attr-defined]
    rebuild_clocks([fleet.ada.pk])  # type: ignore[attr-defined]
    after = {point.day: point.pk for point in ClockPoint.objects.all()}
    begun = day(0).toordinal()
    assert set(after) - set(kept) == {begun + 50.5}
    assert all(after[knot] == kept[knot] for knot in kept if knot < begun + 41)


def test_striking_out_takes_a_fitting_and_a_reading_away(fleet: SmallFleet) -> None:
    Reading.objects.filter(strokes=4000).update(struck_out="other module")
    struck = fleet.ada.fittings.get(reason="failed")  # type: ignore[attr-defined]
    struck.struck_out = "never happened"
    struck.save()
    rebuild_clocks([fleet.ada.pk])  # type: ignore[attr-defined]
    assert not FittingClock.objects.filter(fitting=struck).exists()
    assert not ClockPoint.objects.filter(strokes__gt=0).exists()


def test_struck_out_visits_and_stops_no_longer_count(fleet: SmallFleet) -> None:
    begun = day(0).toordinal()
    last = ClockPoint.objects.latest("day")
    assert ClockPoint.objects.filter(day=begun + 0.4, seen_working=True).exists()
    assert last.days == pytest.approx(last.day - ClockPoint.objects.earliest("day").day - 2.4)
    for model in (Visit, Stop):
        model.objects.update(struck_out="other module")
    rebuild_clocks([fleet.ada.pk])  # type: ignore[attr-defined]
    last = ClockPoint.objects.latest("day")
    assert not ClockPoint.objects.filter(day=begun + 0.4, seen_working=True).exists()
    assert last.days == pytest.approx(last.day - ClockPoint.objects.earliest("day").day)


def test_records_belong_to_the_site_where_the_module_stood(fleet: SmallFleet) -> None:
    ada = fleet.ada  # type: ignore[attr-defined]
    lock = ada.placements.get().site
    assert set(Visit.objects.values_list("site", flat=True)) == {lock.pk}
    depot = fleet.site("DEPOT", kind="depot")
    ada.placements.update(to_on=day(40))
    ada.placements.create(site=depot, from_on=day(40))
    fleet.visit(ada, 45.4)
    rebuild_clocks([ada.pk])
    sites = {visit.happened_on: visit.site_id for visit in Visit.objects.all()}
    assert sites == {day(0): lock.pk, day(40): lock.pk, day(45): depot.pk}
    assert set(Stop.objects.values_list("site", flat=True)) == {lock.pk}
    assert set(Reading.objects.values_list("site", flat=True)) == {lock.pk}


def test_a_site_far_east_has_its_own_day(fleet: SmallFleet) -> None:
    ada = fleet.ada  # type: ignore[attr-defined]
    site = ada.placements.get().site
    site.zone = "Pacific/Auckland"  # 13 hours ahead in January
    site.save()
    fleet.visit(ada, 59.5)
    rebuild_clocks([ada.pk])
    begun = day(0).toordinal()
    assert ClockPoint.objects.filter(day__gt=begun + 60, day__lt=begun + 61, seen_working=True).exists()


def test_a_module_without_any_record_has_no_clock(fleet: SmallFleet) -> None:
    empty = fleet.module("EMPTY", None)
    rebuild_clocks([empty.pk])
    assert not ClockPoint.objects.filter(module=empty).exists()
