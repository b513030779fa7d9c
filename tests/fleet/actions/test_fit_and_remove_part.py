"""Parts go in and come out, one at a time in a position."""

from __future__ import annotations

import datetime as dt
from typing import Any

import pytest

from fleet.actions.entries import CounterEntry
from fleet.actions.errors import AlreadyDone, BadValue, NotAllowed, PositionTaken
from fleet.actions.fit_part import fit_part
from fleet.actions.record_visit import record_visit
from fleet.actions.remove_part import remove_part
from fleet.models import Fitting, FittingClock, Person
from tests.factories import Carriage, at, make_fitting, make_mode, make_module, make_part, on

pytestmark = pytest.mark.django_db


def remove(weir: Carriage, fitting: Fitting, day: str, reason: str = "planned", **fields: Any) -> Fitting:
    return remove_part(by=weir.manager, fitting=fitting, removed_on=on(day), reason=reason, **fields)


def test_a_part_goes_in_with_who_when_and_its_clock(weir: Carriage, rosa: Person) -> None:
    fitting = fit_part(
        by=rosa, module=weir.module, position=weir.nut, part=weir.n1, fitted_on=on("2024-01-10"), serial="S1", lot="L1"
    )
    assert (fitting.entered_by, fitting.serial, fitting.lot) == (rosa, "S1", "L1")
    assert fitting.fitted_known_on == dt.datetime.now(dt.UTC).date()
    assert fitting.code.startswith("F-")
    assert FittingClock.objects.get().fitted_day == on("2024-01-10").toordinal()


def test_a_part_that_was_always_there_has_no_day(weir: Carriage) -> None:
    fitting = fit_part(by=weir.manager, module=weir.module, position=weir.nut, part=weir.n1)
    assert fitting.fitted_on is None
    with pytest.raises(PositionTaken):
        weir.fit(weir.n2, "2024-01-10")


def test_two_with_unknown_start_are_refused_and_asked_for_the_day(weir: Carriage) -> None:
    first = fit_part(by=weir.manager, module=weir.module, position=weir.nut, part=weir.n1)
    remove(weir, first, "2024-02-01")
    with pytest.raises(PositionTaken, match="Enter the day the part went in") as refusal:
        fit_part(by=weir.manager, module=weir.module, position=weir.nut, part=weir.n2)
    assert refusal.value.field == "fitted_on"


def test_out_and_in_on_one_day_is_fine_even_twice(weir: Carriage) -> None:
    first = weir.fit(weir.n1, "2024-01-10")
    remove(weir, first, "2024-02-01")
    second = weir.fit(weir.n2, "2024-02-01")
    remove(weir, second, "2024-02-01", "failed")
    third = weir.fit(weir.n2, "2024-02-01")
    assert Fitting.objects.running().get() == third


def test_a_stay_within_another_is_refused(weir: Carriage) -> None:
    first = weir.fit(weir.n1, "2024-01-10")
    remove(weir, first, "2024-03-01")
    with pytest.raises(PositionTaken, match=r"from 10.January 2024 to 1.March 2024"):
        weir.fit(weir.n2, "2024-02-01")


def test_a_part_before_one_that_is_in_is_refused(weir: Carriage) -> None:
    weir.fit(weir.n1, "2024-03-01")
    with pytest.raises(PositionTaken, match="Say first why it came out"):
        weir.fit(weir.n2, "2024-02-01")


def test_a_removal_is_said_once(weir: Carriage) -> None:
    fitting = weir.fit()
    remove(weir, fitting, "2024-02-01")
    with pytest.raises(AlreadyDone, match="came out of NUT"):
        remove(weir, fitting, "2024-02-02")


@pytest.mark.parametrize(
    ("fields", "field"),
    [
        ({"day": "2024-01-09"}, "removed_on"),
        ({"day": "2424-01-09"}, "removed_on"),
        ({"reason": ""}, "reason"),
        ({"reason": "fell off"}, "reason"),
        ({"found_by": "nose"}, "found_by"),
        ({"failed_on": on("2024-01-20")}, "failed_on"),
        ({"reason": "failed", "failed_on": on("2024-01-09")}, "failed_on"),
        ({"reason": "failed", "failed_on": on("2024-02-02")}, "failed_on"),
        ({"reason": "failed", "failed_on": on("2024-01-20"), "last_good_on": on("2024-01-21")}, "last_good_on"),
        ({"reason": "failed", "last_good_on": on("2024-01-09")}, "last_good_on"),
        ({"known_on": on("2024-01-31")}, "known_on"),
        ({"strokes_at_removal": -1}, "strokes_at_removal"),
        ({"hours_at_removal": float("inf")}, "hours_at_removal"),
        ({"note": "n\x00"}, "note"),
    ],
)
def test_a_wrong_removal_is_refused_at_its_field(weir: Carriage, fields: dict[str, Any], field: str) -> None:
    fitting = weir.fit()
    with pytest.raises(BadValue) as refusal:
        remove(weir, fitting, **{"day": "2024-02-01", **fields})
    assert refusal.value.field == field
    fitting.refresh_from_db()
    assert fitting.removed_on is None


def test_a_planned_removal_has_no_failure_mode_and_a_failure_only_its_own(weir: Carriage) -> None:
    fitting = weir.fit()
    with pytest.raises(BadValue, match="has no failure mode"):
        remove(weir, fitting, "2024-02-01", mode=weir.worn)
    with pytest.raises(BadValue, match="another component"):
        remove(weir, fitting, "2024-02-01", "failed", mode=make_mode())


@pytest.mark.parametrize(
    ("fields", "field"),
    [
        ({"age_at_fit": -1}, "age_at_fit"),
        ({"age_at_fit": float("nan")}, "age_at_fit"),
        ({"strokes_at_fit": 10**30}, "strokes_at_fit"),
        ({"strokes_at_fit": 1.5}, "strokes_at_fit"),
        ({"serial": "s" * 10_000}, "serial"),
        ({"fitted_on": on("2424-01-01")}, "fitted_on"),
        ({"fitted_on": on("1024-01-01")}, "fitted_on"),
        ({"fitted_on": at("2024-01-01")}, "fitted_on"),
        ({"code": "ä"}, "code"),
    ],
)
def test_a_wrong_fitting_is_refused_at_its_field(weir: Carriage, fields: dict[str, Any], field: str) -> None:
    entry = {"position": weir.nut, "part": weir.n1, "fitted_on": on("2024-01-10"), **fields}
    with pytest.raises(BadValue) as refusal:
        fit_part(by=weir.manager, module=weir.module, **entry)
    assert refusal.value.field == field
    assert not Fitting.objects.exists()


def test_a_code_that_is_taken_is_refused(weir: Carriage) -> None:
    weir.fit(code="F-1")
    with pytest.raises(BadValue, match="exists already"):
        weir.fit(weir.s1, code="f-1")


def test_nothing_goes_in_before_the_module_was_built(weir: Carriage) -> None:
    weir.module.built_on = on("2024-02-01")
    weir.module.save()
    with pytest.raises(BadValue, match="was built on"):
        weir.fit(weir.n1, "2024-01-10")


def test_a_part_of_a_visit_went_in_that_day_and_takes_its_counter(weir: Carriage) -> None:
    visit = record_visit(
        by=weir.manager, module=weir.module, happened_at=at("2024-02-01"), counter=CounterEntry(strokes=700, hours=9.5)
    )
    with pytest.raises(BadValue, match=r"was on 1.February 2024"):
        weir.fit(weir.n1, "2024-01-10", visit=visit)
    fitting = weir.fit(weir.n1, "2024-02-01", visit=visit)
    assert (fitting.strokes_at_fit, fitting.hours_at_fit) == (700, 9.5)
    with pytest.raises(BadValue, match="fewer than 700"):
        remove(weir, fitting, "2024-03-01", strokes_at_removal=699)


def test_a_visit_to_another_module_is_none_of_ours(weir: Carriage) -> None:
    other = make_module(type=weir.type, site=weir.site)
    visit = record_visit(by=weir.manager, module=other, happened_at=at("2024-02-01"))
    with pytest.raises(BadValue, match="another module"):
        weir.fit(weir.n1, "2024-02-01", visit=visit)


def test_a_cause_is_another_part_of_the_module_that_was_in_with_it(weir: Carriage) -> None:
    nut, screw = weir.fit(), weir.fit(weir.s1)
    remove(weir, screw, "2024-02-01", "failed")
    with pytest.raises(BadValue, match="taken with another"):
        remove(weir, nut, "2024-02-01", "failed", caused_by=screw)
    with pytest.raises(BadValue, match="in turn"):
        remove(weir, nut, "2024-02-01", "taken with another", caused_by=nut)
    stranger = make_fitting(
        module=make_module(type=weir.type), position=weir.screw, part=make_part(component=weir.screws)
    )
    with pytest.raises(BadValue, match="no standing part of this module"):
        remove(weir, nut, "2024-02-01", "taken with another", caused_by=stranger)
    assert remove(weir, nut, "2024-02-01", "taken with another", caused_by=screw).caused_by == screw


def test_a_part_that_came_later_broke_nothing(weir: Carriage) -> None:
    nut = weir.fit()
    late = weir.fit(weir.s1, "2024-03-01")
    with pytest.raises(BadValue, match="was not in the module together"):
        remove(weir, nut, "2024-02-01", "taken with another", caused_by=late)


def test_only_those_who_see_the_module_and_may_log(weir: Carriage, tom: Person) -> None:
    fitting = weir.fit()
    for person in (tom, weir.contact):
        with pytest.raises(NotAllowed):
            remove_part(by=person, fitting=fitting, removed_on=on("2024-02-01"), reason="planned")
        with pytest.raises(NotAllowed):
            fit_part(by=person, module=weir.module, position=weir.screw, part=weir.s1, fitted_on=on("2024-02-01"))
    weir.crew.is_active = False
    with pytest.raises(NotAllowed):
        remove_part(by=weir.crew, fitting=fitting, removed_on=on("2024-02-01"), reason="planned")
