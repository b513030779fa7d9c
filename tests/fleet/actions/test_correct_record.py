"""Wrong entries are corrected, with a reason; a second editor is told what changed."""

from __future__ import annotations

from typing import Any

import pytest

from fleet.actions.correct_record import correct_record
from fleet.actions.entries import CounterEntry, FindingEntry, PartChange
from fleet.actions.errors import AlreadyDone, BadValue, ChangedSince, ModuleElsewhere, NotAllowed, PositionTaken
from fleet.actions.fit_part import fit_part
from fleet.actions.place_module import place_module
from fleet.actions.record_visit import record_visit
from fleet.actions.remove_part import remove_part
from fleet.actions.report_stop import report_stop
from fleet.actions.strike_out import strike_out
from fleet.models import Finding, Fitting, Person, Placement, Reading, Stop
from tests.factories import Carriage, at, make_part, make_planner, make_site, make_type, on
from tests.fleet.invariants import broken_rules

pytestmark = pytest.mark.django_db


def correct(by: Person | None, record: Any, version: int | None = None, **changes: Any) -> Any:
    version = getattr(record, "version", None) if version is None else version
    return correct_record(by=by, record=record, version=version, changes=changes, reason="read again")


def test_a_correction_keeps_old_and_new_with_who_and_why(weir: Carriage, ines: Person) -> None:
    fitting = weir.fit()
    stored = correct(ines, fitting, part=weir.n2, lot="L-7")
    assert (stored.part, stored.lot, stored.version) == (weir.n2, "L-7", 2)
    newest, oldest = stored.history.order_by("-history_id")
    assert (newest.history_user, newest.history_change_reason) == (ines, "read again")
    assert (oldest.part, oldest.lot) == (weir.n1, "")


def test_the_second_of_two_different_edits_is_told_what_changed(weir: Carriage, ines: Person) -> None:
    fitting = weir.fit()
    correct(ines, fitting, part=weir.n2, lot="L-7")
    with pytest.raises(ChangedSince) as refusal:
        correct(weir.manager, fitting, version=1, lot="L-8")
    told = {change["field"]: (change["before"], change["now"]) for change in refusal.value.data["changes"]}
    assert told == {"part": (weir.n1.code, weir.n2.code), "lot": ("empty", "L-7")}
    assert refusal.value.message.startswith("Ines changed fitting F-")
    assert refusal.value.data["changes"][0]["when"].date() == fitting.entered_at.date()


def test_the_same_edit_twice_is_one(weir: Carriage, ines: Person) -> None:
    fitting = weir.fit()
    for _ in range(2):
        assert correct(ines, fitting, version=1, lot="L-7").version == 2


def test_every_check_of_the_entry_runs_again(weir: Carriage, ines: Person) -> None:
    first = weir.fit(weir.n1, "2024-01-10")
    remove_part(by=ines, fitting=first, removed_on=on("2024-02-01"), reason="failed", failed_on=on("2024-01-30"))
    second = weir.fit(weir.n2, "2024-02-01")
    first.refresh_from_db()
    refused = {
        "part": (BadValue, {"part": weir.s1}),
        "fitted_on": (BadValue, {"fitted_on": on("2424-01-01")}),
        "failed_on": (BadValue, {"failed_on": on("2024-02-02")}),
        "reason": (BadValue, {"reason": "tired"}),
        "position": (PositionTaken, {"removed_on": on("2024-02-15")}),
        "mode": (BadValue, {"mode": weir.bowed}),
        "code": (BadValue, {"code": "F-9"}),
        "lot": (BadValue, {"lot": "x" * 61}),
        "age_at_fit": (BadValue, {"age_at_fit": float("nan")}),
    }
    for field, (kind, changes) in refused.items():
        with pytest.raises(kind) as refusal:
            correct(ines, first, **changes)
        assert refusal.value.field == field, changes
    with pytest.raises(PositionTaken):
        correct(ines, second, fitted_on=on("2024-01-20"))
    with pytest.raises(BadValue, match="does not fit"):
        correct(ines, second, part=make_part(component=weir.nuts, fits_types=[make_type()]))
    assert broken_rules() == []


def test_a_removal_that_never_was_is_taken_back_whole(weir: Carriage, ines: Person) -> None:
    fitting = weir.fit()
    remove_part(by=ines, fitting=fitting, removed_on=on("2024-02-01"), reason="failed", mode=weir.worn)
    stored = correct(ines, Fitting.objects.get(), removed_on=None)
    assert (stored.removed_on, stored.reason, stored.mode, stored.removed_known_on) == (None, "", None, None)
    assert Fitting.objects.running().get() == fitting


def test_an_end_on_another_day_belongs_to_that_days_visit_and_counter(weir: Carriage, ines: Person) -> None:
    record_visit(by=ines, module=weir.module, happened_at=at("2024-01-05"), counter=CounterEntry(strokes=300))
    visit = record_visit(
        by=ines,
        module=weir.module,
        happened_at=at("2024-01-10"),
        counter=CounterEntry(strokes=500),
        changes=[PartChange(position=weir.nut, part=weir.n1)],
    )
    fitting = Fitting.objects.get()
    assert (fitting.fitted_visit, fitting.strokes_at_fit) == (visit, 500)
    moved = correct(ines, fitting, fitted_on=on("2024-01-05"))
    assert (moved.fitted_visit.happened_on, moved.strokes_at_fit) == (on("2024-01-05"), 300)
    moved = correct(ines, moved, fitted_on=on("2024-01-07"))
    assert (moved.fitted_visit, moved.strokes_at_fit) == (None, None)


def test_a_visit_on_the_wrong_day_takes_everything_along(weir: Carriage, ines: Person) -> None:
    old = weir.fit(weir.n1, "2024-01-10")
    change = PartChange(position=weir.nut, reason="failed", failed_on=on("2024-03-09"), part=weir.n2)
    visit = record_visit(
        by=ines,
        module=weir.module,
        happened_at=at("2024-03-09"),
        left="stopped",
        counter=CounterEntry(strokes=900),
        play={weir.screw: 0.2},
        changes=[change],
    )
    for day in ("2024-03-11", "2024-03-02"):
        visit = correct(ines, visit, happened_at=at(day))
        old.refresh_from_db()
        new = Fitting.objects.running().get()
        assert visit.happened_on == old.removed_on == old.failed_on == new.fitted_on == on(day)
        assert Stop.objects.get().stopped_at == at(day)
        assert {reading.read_at for reading in Reading.objects.standing()} == {at(day)}
        assert new.strokes_at_fit == old.strokes_at_removal == 900
        assert broken_rules() == []
    assert Reading.objects.exclude(struck_out="").count() == 4


def test_a_visit_does_not_move_past_what_came_after_it(weir: Carriage, ines: Person) -> None:
    visit = record_visit(
        by=ines,
        module=weir.module,
        happened_at=at("2024-03-09"),
        counter=CounterEntry(strokes=900),
        changes=[PartChange(position=weir.nut, part=weir.n1)],
    )
    later = record_visit(
        by=ines,
        module=weir.module,
        happened_at=at("2024-03-20"),
        counter=CounterEntry(strokes=950),
        changes=[PartChange(position=weir.nut, reason="planned", part=weir.n2)],
    )
    for record, day in ((visit, "2024-03-21"), (later, "2024-03-08")):
        with pytest.raises(BadValue):
            correct(ines, record, happened_at=at(day))
    with pytest.raises(BadValue, match="future"):
        correct(ines, visit, happened_at=at("2424-03-21"))
    with pytest.raises(BadValue, match="before it happened"):
        correct(ines, visit, known_on=on("2024-03-08"))
    assert broken_rules() == []


def test_how_a_visit_left_its_module_is_corrected_with_its_stop(weir: Carriage, ines: Person) -> None:
    report_stop(by=ines, module=weir.module, stopped_at=at("2024-03-01"))
    visit = record_visit(by=ines, module=weir.module, happened_at=at("2024-03-09"))
    stop = Stop.objects.get()
    assert stop.running_at == at("2024-03-09")
    visit = correct(ines, visit, left="stopped")
    stop.refresh_from_db()
    assert stop.running_at is None
    visit = correct(ines, visit, left="running")
    stop.refresh_from_db()
    assert stop.running_at == at("2024-03-09")
    last = record_visit(by=ines, module=weir.module, happened_at=at("2024-03-12"), left="stopped")
    correct(ines, last, left="running")
    assert not Stop.objects.now().exists()
    assert broken_rules() == []


def test_a_stop_a_finding_and_a_stay_are_corrected(weir: Carriage, ines: Person) -> None:
    stop = report_stop(by=ines, module=weir.module, stopped_at=at("2024-03-01"), running_at=at("2024-03-05"))
    assert correct(ines, stop, running_at=None).running_at is None
    with pytest.raises(BadValue) as refusal:
        correct(ines, Stop.objects.get(), running_at=at("2024-02-05"))
    assert refusal.value.field == "running_at"
    record_visit(
        by=ines, module=weir.module, happened_at=at("2024-02-01"), findings=[FindingEntry(weir.nut, "cleaned")]
    )
    finding = correct(ines, Finding.objects.get(), finding="failed", mode=weir.worn)
    assert (finding.finding, finding.mode) == ("failed", weir.worn)
    with pytest.raises(BadValue, match="another component"):
        correct(ines, finding, mode=weir.bowed)
    pond = make_site()
    stay = correct(ines, Placement.objects.get(), site=pond, bay="B-9")
    assert (stay.site, stay.bay) == (pond, "B-9")
    stop.refresh_from_db()
    assert stop.site == pond
    with pytest.raises((BadValue, ModuleElsewhere)):
        correct(ines, stay, to_on=on("2019-01-01"))


def test_a_reading_is_not_edited(weir: Carriage, ines: Person) -> None:
    record_visit(by=ines, module=weir.module, happened_at=at("2024-03-09"), counter=CounterEntry(strokes=9))
    with pytest.raises(BadValue, match="Enter the right one"):
        correct(ines, Reading.objects.get(), strokes=10)


def test_what_is_struck_out_or_without_a_reason_is_not_corrected(weir: Carriage, ines: Person) -> None:
    fitting = weir.fit()
    with pytest.raises(BadValue, match="reason is missing"):
        correct_record(by=ines, record=fitting, version=1, changes={"lot": "L"}, reason=" ")
    fitting = strike_out(by=ines, record=fitting, reason="never happened")
    with pytest.raises(AlreadyDone, match="never happened"):
        correct(ines, fitting, lot="L")


def test_a_part_of_another_kind_is_no_value(weir: Carriage, ines: Person) -> None:
    fitting = weir.fit()
    for wrong in ("N1", 7, weir.nut, None):
        with pytest.raises(BadValue) as refusal:
            correct(ines, fitting, part=wrong)
        assert refusal.value.field == "part"


def test_a_crew_corrects_its_own_entry_of_the_same_day(weir: Carriage, rosa: Person, time_machine: Any) -> None:
    time_machine.move_to(at("2024-03-09", "10:00"))
    mine = fit_part(by=rosa, module=weir.module, position=weir.nut, part=weir.n1, fitted_on=on("2024-03-09"))
    correct(rosa, mine, lot="L-1")
    time_machine.move_to(at("2024-03-10", "10:00"))
    mine.refresh_from_db()
    with pytest.raises(NotAllowed, match="Mark it as looking wrong"):
        correct(rosa, mine, lot="L-2")
    with pytest.raises(NotAllowed):
        strike_out(by=rosa, record=mine, reason="wrong")
    remove_part(by=rosa, fitting=mine, removed_on=on("2024-03-10"), reason="planned")
    mine.refresh_from_db()
    assert correct(rosa, mine, reason="upgrade").reason == "upgrade"
    with pytest.raises(NotAllowed):
        correct(rosa, mine, part=weir.n2)


def test_a_planner_of_the_site_where_it_stands_now_leaves_its_past_elsewhere_alone(weir: Carriage) -> None:
    visit = record_visit(by=weir.crew, module=weir.module, happened_at=at("2024-02-01"))
    pond = make_site()
    place_module(by=weir.manager, module=weir.module, site=pond, from_on=on("2024-03-01"))
    here = record_visit(by=weir.manager, module=weir.module, happened_at=at("2024-03-09"))
    half = make_planner(sites=[pond])
    assert correct(half, here, note="all well").note == "all well"
    with pytest.raises(NotAllowed, match="none of yours"):
        correct(half, visit, note="all well")
    with pytest.raises(NotAllowed, match="none of yours"):
        strike_out(by=half, record=visit, reason="wrong")


def test_others_entries_and_stays_are_the_offices(weir: Carriage, rosa: Person, tom: Person) -> None:
    fitting = weir.fit()
    for person in (rosa, tom, weir.contact):
        with pytest.raises(NotAllowed):
            correct(person, fitting, lot="L-1")
    with pytest.raises(NotAllowed):
        correct(rosa, Placement.objects.get(), bay="B-1")
