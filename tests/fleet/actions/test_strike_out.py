"""A wrong entry is struck out with a reason; it stays in the book and leaves every count."""

from __future__ import annotations

from typing import Any

import pytest

from fleet.actions.entries import CounterEntry, FindingEntry, PartChange
from fleet.actions.errors import AlreadyDone, BadValue, ChangedSince, NotAllowed, PositionTaken
from fleet.actions.record_visit import record_visit
from fleet.actions.remove_part import remove_part
from fleet.actions.report_stop import report_stop
from fleet.actions.strike_out import strike_out
from fleet.models import Finding, Fitting, FittingClock, Module, Person, Placement, Reading, Stop, Visit
from tests.factories import Carriage, at, make_crew, on
from tests.fleet.invariants import broken_rules

pytestmark = pytest.mark.django_db


def strike(by: Person | None, record: Any, **fields: Any) -> Any:
    return strike_out(by=by, record=record, reason="never happened", **fields)


def full_visit(weir: Carriage, day: str = "2024-03-09", **fields: Any) -> Visit:
    """A stop ends, a nut is changed, a counter is read, something is found."""
    entry = {
        "counter": CounterEntry(strokes=900),
        "changes": [PartChange(position=weir.nut, reason="failed", mode=weir.worn, part=weir.n2)],
        "findings": [FindingEntry(weir.screw, "cleaned")],
        **fields,
    }
    return record_visit(by=weir.crew, module=weir.module, happened_at=at(day), **entry)


def test_a_struck_out_fitting_stays_with_who_and_why_and_counts_no_more(weir: Carriage, ines: Person) -> None:
    fitting = strike(ines, weir.fit())
    assert (fitting.struck_out, fitting.struck_out_by, fitting.version) == ("never happened", ines, 2)
    assert fitting.struck_out_at is not None
    assert fitting.history.first().struck_out == "never happened"
    assert not FittingClock.objects.exists()
    weir.fit(weir.n2, "2024-01-01")
    with pytest.raises(AlreadyDone, match="struck out already"):
        strike(ines, fitting)


def test_a_reason_is_needed_and_no_longer_than_it_fits(weir: Carriage, ines: Person) -> None:
    fitting = weir.fit()
    for reason in ("", "  ", "x" * 501, "\x00"):
        with pytest.raises(BadValue) as refusal:
            strike_out(by=ines, record=fitting, reason=reason)
        assert refusal.value.field == "reason"


def test_an_older_version_is_told_what_changed(weir: Carriage, ines: Person) -> None:
    fitting = weir.fit()
    remove_part(by=ines, fitting=fitting, removed_on=on("2024-02-01"), reason="planned")
    with pytest.raises(ChangedSince, match="Removed on: empty → "):
        strike(ines, fitting, version=1)


def test_a_visit_with_something_on_it_says_what(weir: Carriage, ines: Person) -> None:
    weir.fit()
    visit = full_visit(weir)
    with pytest.raises(BadValue) as refusal:
        strike(ines, visit)
    words = refusal.value.message.replace("\u00a0", " ")
    assert "1 part fitted, 1 part removed, 1 finding, 1 reading" in words
    assert refusal.value.field == "with_all"


def test_a_visit_struck_out_with_all_leaves_the_module_as_it_was(weir: Carriage, ines: Person) -> None:
    old = weir.fit()
    stop = report_stop(by=weir.contact, module=weir.module, stopped_at=at("2024-03-05"))
    visit = full_visit(weir)
    strike(ines, visit, with_all=True)
    old.refresh_from_db()
    stop.refresh_from_db()
    assert Fitting.objects.running().get() == old
    assert (old.removed_on, old.reason, old.mode, old.removed_visit, old.strokes_at_removal) == (
        None,
        "",
        None,
        None,
        None,
    )
    assert stop.running_at is None
    assert not Finding.objects.standing().exists()
    assert not Reading.objects.standing().exists()
    assert broken_rules() == []


def test_a_stop_that_the_visit_began_goes_with_it(weir: Carriage, ines: Person) -> None:
    visit = full_visit(weir, left="stopped", changes=[])
    strike(ines, visit, with_all=True)
    assert not Stop.objects.standing().exists()


def test_a_visit_that_later_ones_build_on_waits_for_them(weir: Carriage, ines: Person) -> None:
    weir.fit()
    first = full_visit(weir, "2024-03-09")
    last = full_visit(weir, "2024-03-20")
    with pytest.raises(BadValue, match="Strike out or correct that removal first"):
        strike(ines, first, with_all=True)
    strike(ines, last, with_all=True)
    strike(ines, first, with_all=True)
    assert broken_rules() == []


def test_a_part_does_not_come_back_into_a_position_that_was_filled_since(weir: Carriage, ines: Person) -> None:
    weir.fit()
    out = full_visit(weir, changes=[PartChange(position=weir.nut, reason="failed")])
    weir.fit(weir.n2, "2024-03-20")
    with pytest.raises(PositionTaken):
        strike(ines, out, with_all=True)
    assert Visit.objects.standing().count() == 1


def test_a_part_that_broke_others_is_not_struck_out_alone(weir: Carriage, ines: Person) -> None:
    nut, screw = weir.fit(), weir.fit(weir.s1)
    remove_part(by=ines, fitting=screw, removed_on=on("2024-02-01"), reason="failed")
    remove_part(by=ines, fitting=nut, removed_on=on("2024-02-01"), reason="taken with another", caused_by=screw)
    with pytest.raises(BadValue, match="Correct their cause first"):
        strike(ines, screw)


def test_a_visit_with_nothing_on_it_lets_its_stop_go_on(weir: Carriage, ines: Person) -> None:
    stop = report_stop(by=weir.contact, module=weir.module, stopped_at=at("2024-03-05"))
    visit = record_visit(by=weir.crew, module=weir.module, happened_at=at("2024-03-09"))
    next_visit = record_visit(by=weir.crew, module=weir.module, happened_at=at("2024-03-20"))
    strike(ines, visit)
    stop.refresh_from_db()
    assert stop.running_at == next_visit.happened_at


def test_a_finding_a_stop_and_a_stay_are_struck_out(weir: Carriage, ines: Person) -> None:
    full_visit(weir, changes=[])
    report_stop(by=ines, module=weir.module, stopped_at=at("2024-03-10"))
    for kind in (Finding, Stop, Placement):
        strike(ines, kind.objects.get())
        assert not kind.objects.standing().exists()
    assert Visit.objects.get().site is None


def test_a_crew_strikes_out_its_own_of_the_same_day_only(weir: Carriage, rosa: Person) -> None:
    paul = make_crew(weir.site)
    weir.fit()
    visit = full_visit(weir)
    with pytest.raises(NotAllowed):
        strike(paul, visit, with_all=True)
    with pytest.raises(NotAllowed):
        strike(rosa, Placement.objects.get())
    strike(rosa, visit, with_all=True)
    assert Fitting.objects.running().count() == 1


def test_a_module_is_not_struck_out(weir: Carriage, ines: Person) -> None:
    with pytest.raises(BadValue, match="not struck out"):
        strike(ines, Module.objects.get())
