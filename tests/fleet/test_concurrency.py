"""Two people at one moment: Rosa and Tom, both crew of the weir, and the planner Ines in the office.

The writers run on connections of their own. A meeting point inside the action makes both stand where a missing lock
would let them both through; where the lock is there, the second arrives only when the first is done.
"""

from __future__ import annotations

import datetime as dt
import uuid
from typing import Any

import pytest

from fleet.actions import base
from fleet.actions import correct_record as correct_record_file
from fleet.actions import record_visit as record_visit_file
from fleet.actions.checks_places import Places
from fleet.actions.checks_stays import Stays
from fleet.actions.correct_record import correct_record
from fleet.actions.entries import CounterEntry, PartChange
from fleet.actions.errors import (
    AlreadyDone,
    BadValue,
    ChangedSince,
    Collided,
    ModuleElsewhere,
    PositionTaken,
    RecordError,
)
from fleet.actions.fit_part import fit_part
from fleet.actions.place_module import place_module
from fleet.actions.record_reading import record_reading
from fleet.actions.record_visit import record_visit
from fleet.actions.report_stop import report_stop
from fleet.actions.save_site import save_site
from fleet.models import EntryKey, Fitting, Module, Person, Placement, Reading, Stop, Visit
from tests.factories import Carriage, at, make_crew, make_module, make_site, on
from tests.fleet.invariants import broken_rules
from tests.fleet.together import Meeting, at_once, raised, recorded

pytestmark = pytest.mark.django_db(transaction=True)


@pytest.fixture
def weir() -> Carriage:
    return Carriage()


@pytest.fixture
def rosa(weir: Carriage) -> Person:
    return weir.crew


@pytest.fixture
def tom(weir: Carriage) -> Person:
    return make_crew(weir.site)


def fitting_by(person: Person, weir: Carriage, day: str = "2024-03-09") -> Any:
    return lambda: fit_part(by=person, module=weir.module, position=weir.nut, part=weir.n1, fitted_on=on(day))


def change_by(person: Person, weir: Carriage, **fields: Any) -> Any:
    entry = PartChange(position=weir.nut, reason="failed", part=weir.n2)
    return lambda: record_visit(by=person, module=weir.module, happened_at=at("2024-03-09"), changes=[entry], **fields)


def test_two_crews_fill_the_last_position(
    weir: Carriage, rosa: Person, tom: Person, monkeypatch: pytest.MonkeyPatch
) -> None:
    meeting = Meeting().after(monkeypatch, Stays, "__init__")
    answers = at_once(fitting_by(rosa, weir), fitting_by(tom, weir))
    assert len(recorded(answers)) == 1
    assert "holds" in raised(answers, PositionTaken)[0].message
    assert Fitting.objects.count() == 1
    assert not meeting.met
    assert broken_rules() == []


@pytest.mark.postgres
def test_the_meeting_point_would_show_a_missing_lock(
    weir: Carriage, rosa: Person, tom: Person, monkeypatch: pytest.MonkeyPatch
) -> None:
    """The proof that the test above can fail: without the lock both get through, and only the index stops one."""
    monkeypatch.setattr(base, "lock_module", lambda module, by=None: Module.objects.get(pk=module.pk))
    meeting = Meeting().after(monkeypatch, Stays, "__init__")
    answers = at_once(fitting_by(rosa, weir), fitting_by(tom, weir))
    assert meeting.met
    assert len(recorded(answers)) == 1
    assert "at the same moment" in raised(answers, Collided)[0].message


def test_the_same_submission_twice_at_once_is_one_visit(weir: Carriage, rosa: Person) -> None:
    weir.fit()
    key = uuid.uuid4()
    answers = at_once(*[change_by(rosa, weir, entry_key=key) for _ in range(3)])
    assert len({visit.pk for visit in recorded(answers)}) == 1
    assert len(recorded(answers)) == 3
    assert (Visit.objects.count(), EntryKey.objects.count()) == (1, 1)


def test_one_key_for_two_modules_at_once_serves_one_of_them(
    weir: Carriage, rosa: Person, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Different modules, so that no lock on a module keeps the two apart."""
    other = make_module(type=weir.type, site=weir.site)
    key = uuid.uuid4()
    Meeting().after(monkeypatch, record_visit_file, "clean_instant")
    answers = at_once(
        *[
            lambda module=module: record_visit(by=rosa, module=module, happened_at=at("2024-03-09"), entry_key=key)
            for module in (weir.module, other)
        ]
    )
    assert len(recorded(answers)) == 1
    assert "used for another entry" in raised(answers, BadValue)[0].message
    assert Visit.objects.count() == 1


def test_of_two_corrections_the_second_is_told_what_changed(weir: Carriage, monkeypatch: pytest.MonkeyPatch) -> None:
    fitting = weir.fit()
    meeting = Meeting().after(monkeypatch, correct_record_file, "check_version")
    answers = at_once(
        *[
            lambda lot=lot: correct_record(
                by=weir.manager, record=fitting, version=1, changes={"lot": lot}, reason="read again"
            )
            for lot in ("L-1", "L-2")
        ]
    )
    [stored], [refused] = recorded(answers), raised(answers, ChangedSince)
    assert not meeting.met
    fitting.refresh_from_db()
    assert fitting.lot == stored.lot
    [told] = refused.data["changes"]
    assert (told["field"], told["before"], told["now"]) == ("lot", "empty", stored.lot)
    assert told["who"] == weir.manager.name
    assert fitting.version == 2


def test_a_module_goes_to_one_of_two_sites(weir: Carriage, monkeypatch: pytest.MonkeyPatch) -> None:
    sites = [make_site(), make_site()]
    meeting = Meeting().after(monkeypatch, Places, "__init__")
    answers = at_once(
        *[
            lambda site=site: place_module(by=weir.manager, module=weir.module, site=site, from_on=on("2024-03-09"))
            for site in sites
        ]
    )
    assert len(recorded(answers)) == 1
    assert "that same day" in raised(answers, ModuleElsewhere)[0].message
    assert Placement.objects.current().count() == 1
    assert not meeting.met
    assert broken_rules() == []


def test_a_stop_reported_twice_at_once_stands_once(weir: Carriage, rosa: Person, tom: Person) -> None:
    answers = at_once(
        *[
            lambda person=person: report_stop(by=person, module=weir.module, stopped_at=at("2024-03-09"))
            for person in (rosa, tom, weir.contact)
        ]
    )
    assert len(recorded(answers)) == 1
    assert len(raised(answers, AlreadyDone)) == 2
    assert Stop.objects.now().count() == 1


def test_two_faces_at_once_do_not_fall(weir: Carriage, rosa: Person, tom: Person) -> None:
    at_once(
        *[
            lambda person=person, strokes=strokes, hour=hour: record_reading(
                by=person, module=weir.module, read_at=at("2024-03-09", hour), counter=CounterEntry(strokes=strokes)
            )
            for person, strokes, hour in ((rosa, 900, "10:00"), (tom, 500, "11:00"))
        ]
    )
    assert Reading.objects.count() == 1
    assert broken_rules() == []


def test_crossing_visits_and_a_change_of_their_site_wait_for_each_other_in_turn(weir: Carriage) -> None:
    """Each writer goes through the modules in its own order, while the office changes the site below them."""
    modules = [weir.module, *(make_module(type=weir.type, site=weir.site) for _ in range(2))]
    people = [weir.crew, make_crew(weir.site), weir.manager]

    def round_of_visits(number: int) -> int:
        mine = modules[number:] + modules[:number]
        for day in range(1, 5):
            for module in mine:
                happened_at = at("2024-03-01", f"{8 + number:02}:00") + dt.timedelta(days=day)
                record_visit(by=people[number], module=module, happened_at=happened_at)
        return number

    def office() -> int:
        for number in range(6):
            save_site(by=weir.manager, site=weir.site, strokes_per_day=float(number + 1), code=f"WEIR-NEW-{number}")
        return 3

    answers = at_once(*[lambda number=number: round_of_visits(number) for number in range(3)], office)
    assert answers == [0, 1, 2, 3]
    assert Visit.objects.count() == 3 * 3 * 4
    assert broken_rules() == []


def test_many_nut_changes_at_once_leave_one_part_in(weir: Carriage, rosa: Person, tom: Person) -> None:
    weir.fit()
    answers = at_once(*[change_by(person, weir) for person in (rosa, tom, rosa, tom)])
    assert all(isinstance(answer, Visit | RecordError) for answer in answers)
    assert Fitting.objects.running().count() == 1
    assert broken_rules() == []


@pytest.mark.postgres
def test_the_database_itself_keeps_overlapping_stays_out(weir: Carriage) -> None:
    from django.db import IntegrityError

    weir.fit(fitted_on="2024-01-10")
    with pytest.raises(IntegrityError, match="fitting_no_overlap"):
        Fitting.objects.create(
            module=weir.module, position=weir.nut, part=weir.n2, code="PAST", fitted_on=on("2024-02-01"),
            removed_on=on("2024-03-01"), reason="planned",
        )  # fmt: skip
