"""Failures and parts used between two days, one story a rule, and beside the life data on random fleets."""

from __future__ import annotations

import datetime as dt
import random
from collections import Counter

import pytest

from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.models import Finding, Fitting, Module, Part, Placement
from reliability.forecasts.what_happened import (
    Happened,
    failures_between,
    failures_in_modules_that_came_later,
)
from tests.reliability.small_fleet import SmallFleet, day
from tests.reliability.told_fleet import tell_module, write_fleet

pytestmark = pytest.mark.django_db
BEGIN, END = 100, 191


@pytest.fixture
def fleet() -> SmallFleet:
    return SmallFleet()


def happened(
    fleet: SmallFleet, begin: int = BEGIN, end: int = END, known: int | None = None, **asked: list[str]
) -> Happened:
    rebuild_clocks()
    known_on = None if known is None else day(known)
    return failures_between(fleet.component, day(begin), day(end), known_on=known_on, **asked)


def both(found: Happened) -> tuple[int, int]:
    return found.failures, found.parts_used


def refit(fleet: SmallFleet, after: Fitting, fitted: int, part: Part | None = None, **fields: object) -> Fitting:
    """The next part in the same position."""
    return Fitting.objects.create(
        code=f"{after.code}-NEXT", module=after.module, position=after.position,
        part=part or after.part, fitted_on=day(fitted), **fields,
    )  # fmt: skip


def test_a_failure_counts_on_the_day_it_failed_and_the_part_on_the_day_it_went_in(fleet: SmallFleet) -> None:
    old = fleet.fit(fleet.module("ADA", fleet.site()), 10, 109, "failed", failed=101)
    refit(fleet, old, 109, part=fleet.n2)
    found = happened(fleet)
    assert both(found) == (1, 1)
    assert [(week["failures"], week["parts_used"]) for week in found.weeks()[:3]] == [(1, 0), (0, 1), (0, 0)]
    assert len(found.weeks()) == 13
    assert found.weeks()[1]["from"] == day(107).isoformat()
    assert found.by("part") == {"N1": {"failures": 1, "parts_used": 0}, "N2": {"failures": 0, "parts_used": 1}}
    assert found.by("site") == {"LOCK": {"failures": 1, "parts_used": 1}}


def test_the_first_day_counts_and_the_last_does_not(fleet: SmallFleet) -> None:
    site = fleet.site()
    for number, removed in enumerate((99, 100, 190, 191)):
        fleet.fit(fleet.module(f"M-{number}", site), 10, removed, "failed")
    assert happened(fleet).failures == 2


def test_worn_to_limit_is_a_failure_and_other_reasons_are_not(fleet: SmallFleet) -> None:
    site = fleet.site()
    reasons = ["failed", "worn to limit", "planned", "taken with another", "upgrade", "module withdrawn", "not known"]
    for number, reason in enumerate(reasons):
        refit(fleet, fleet.fit(fleet.module(f"M-{number}", site), 10, 120, reason), 120)
    assert both(happened(fleet)) == (2, 7)


def test_struck_out_records_and_test_stands_are_left_out(fleet: SmallFleet) -> None:
    struck = fleet.fit(fleet.module("ADA", fleet.site()), 10, 120, "failed", struck_out="entered twice")
    refit(fleet, struck, 120)
    on_rig = fleet.fit(fleet.module("RIG-1", fleet.site("TANK", kind="rig")), 10, 120, "failed")
    refit(fleet, on_rig, 120)
    assert both(happened(fleet)) == (0, 0)


def test_a_finding_is_no_failure_of_the_part(fleet: SmallFleet) -> None:
    ada = fleet.module("ADA", fleet.site())
    fitting = fleet.fit(ada, 10)
    Finding.objects.create(visit=fleet.visit(ada, 120.5), position=fitting.position, finding="failed")
    assert both(happened(fleet)) == (0, 0)


def test_what_a_new_module_brings_along_is_not_used(fleet: SmallFleet) -> None:
    ada = fleet.module("ADA", fleet.site(), placed=120)
    first = fleet.fit(ada, 120, 150, "failed")
    refit(fleet, first, 150)
    assert both(happened(fleet)) == (1, 1)
    assert failures_in_modules_that_came_later(fleet.component, day(BEGIN), day(END)) == 1
    assert failures_in_modules_that_came_later(fleet.component, day(121), day(END)) == 0


def test_a_part_that_went_in_at_the_depot_counts_where_the_module_served(fleet: SmallFleet) -> None:
    ada = fleet.module("ADA", fleet.site())
    ada.placements.update(to_on=day(120))
    Placement.objects.create(module=ada, site=fleet.site("YARD", kind="depot"), from_on=day(120))
    old = fleet.fit(ada, 10, 130, "failed", failed=119)
    refit(fleet, old, 130)
    assert happened(fleet).by("site") == {"LOCK": {"failures": 1, "parts_used": 1}}


def test_a_failed_part_of_unknown_age_failed_all_the_same(fleet: SmallFleet) -> None:
    old = fleet.fit(fleet.module("ADA", fleet.site(records_from=day(0))), None, 120, "failed")
    refit(fleet, old, 120)
    assert both(happened(fleet)) == (1, 1)


def test_only_the_sites_asked_for(fleet: SmallFleet) -> None:
    for tag, site in (("ADA", fleet.site()), ("BEN", fleet.site("WEIR")), ("CY", None)):
        refit(fleet, fleet.fit(fleet.module(tag, site), 10, 120, "failed"), 120)
    assert both(happened(fleet, sites=["WEIR"])) == (1, 1)
    assert both(happened(fleet, sites=["no place"])) == (1, 1)
    assert both(happened(fleet)) == (3, 3)


def test_what_became_known_later_is_not_there_yet(fleet: SmallFleet) -> None:
    site = fleet.site()
    ada, ben = fleet.module("ADA", site), fleet.module("BEN", site)
    refit(fleet, fleet.fit(ada, 10, 120, "failed", known=200), 120, fitted_known_on=day(200))
    late = fleet.visit(ben, 130.4, known=210)
    refit(fleet, fleet.fit(ben, 10, 130, "failed", removed_visit=late), 130, fitted_visit=late)
    assert [both(happened(fleet, known=known)) for known in (191, 200, 210)] == [(0, 0), (1, 1), (2, 2)]
    assert both(happened(fleet)) == (2, 2)


@pytest.mark.parametrize("seed", range(4))
def test_it_counts_the_failures_of_the_life_data(seed: int) -> None:
    """Random fleets, whole span: as many failures as the life data have, and those of which no age is known."""
    rng, fleet = random.Random(seed), SmallFleet()
    write_fleet(fleet, [tell_module(rng, f"M-{number}") for number in range(12)])
    found = happened(fleet, -2000, 2000)
    lived = fleet.lives(900, rebuild=False, by="part")
    ageless = Counter(
        row.part.code
        for out in lived.left_out
        if out.reason not in ("on a test stand", "struck out")
        for row in out.query
        if row.reason in ("failed", "worn to limit")
    )
    for part in ("N1", "N2"):
        counted = found.by("part").get(part, {"failures": 0})["failures"]
        assert counted == lived.count("failed", group=part) + ageless[part]
    assert found.failures > 10


def test_an_empty_stretch_has_its_weeks(fleet: SmallFleet) -> None:
    found = failures_between(fleet.component, day(0), day(10))
    assert [week["failures"] for week in found.weeks()] == [0, 0]
    assert found.document()["until"] == dt.date(2024, 1, 11).isoformat()
    assert Module.objects.count() == 0
