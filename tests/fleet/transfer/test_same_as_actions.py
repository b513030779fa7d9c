"""The bulk path and the actions leave the same rows: one module told by actions, its twin by files."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest

from fleet.actions.entries import CounterEntry, FindingEntry, PartChange
from fleet.actions.record_visit import record_visit
from fleet.actions.report_stop import report_stop
from fleet.models import (
    ClockPoint,
    Component,
    FailureMode,
    Finding,
    Fitting,
    FittingClock,
    ModuleType,
    Part,
    Person,
    Placement,
    Position,
    Reading,
    Site,
    Stop,
    Visit,
)
from tests import factories as make
from tests.fleet.invariants import broken_rules
from tests.fleet.transfer.files import bring_in

pytestmark = pytest.mark.django_db

# What must differ: the record's own number and code, its moment and way of entry, how often it was saved on the way.
OWN = {"id", "code", "code_order", "module_id", "fitting_id", "version", "entered_at", "entered_by_id", "batch_id"}
DERIVED = {(Visit, "site_id"), (Stop, "site_id")}
VISITS = {"visit_id", "fitted_visit_id", "removed_visit_id"}


def plain(record: Any) -> dict[str, Any]:
    row = {each.attname: getattr(record, each.attname) for each in record._meta.concrete_fields}
    kept = {name: value for name, value in row.items() if name not in OWN | VISITS | {"caused_by_id"}}
    for name in VISITS & set(row):
        visit = getattr(record, name.removesuffix("_id"))
        kept[name] = visit and visit.happened_at
    if "caused_by_id" in row:
        kept["caused_by"] = record.caused_by and record.caused_by.position.code
    return kept


def rows_of(model: Any, order: list[str], **chosen: Any) -> list[dict[str, Any]]:
    return [plain(record) for record in model.objects.filter(**chosen).order_by(*order)]


def tell_by_actions(world: make.Carriage) -> None:
    crew, module = world.crew, world.module
    common = {"by": crew, "module": module, "crew": crew}
    fitted = make.at("2024-01-10")
    record_visit(
        **common,
        happened_at=fitted,
        known_on=fitted.date(),
        counter=CounterEntry(strokes=100, counter="C1"),
        changes=[
            PartChange(position=world.nut, part=world.n1, serial="A1", lot="L7", age_at_fit=50),
            PartChange(position=world.screw, part=world.s1),
        ],
    )
    report_stop(by=crew, module=module, stopped_at=make.at("2024-02-28"), known_on=make.on("2024-02-28"), note="silent")
    mended = make.at("2024-03-01", "10:30")
    record_visit(
        **common,
        happened_at=mended,
        known_on=mended.date(),
        note="bent by a branch",
        counter=CounterEntry(strokes=5100),
        play={world.screw: 0.4},
        changes=[
            PartChange(
                position=world.nut,
                reason="taken with another",
                part=world.n2,
                caused_by_position=world.screw,
            ),
            PartChange(
                position=world.screw,
                reason="failed",
                mode=world.bowed,
                found_by="when needed",
                failed_on=make.on("2024-02-28"),
                last_good_on=make.on("2024-02-20"),
            ),
        ],
        findings=[FindingEntry(position=world.screw, finding="failed", mode=world.bowed, note="bowed")],
    )


def files_of_twin(world: make.Carriage, twin: Any) -> dict[str, str]:
    m, crew, n1, n2, s1, mode = (
        twin.code,
        world.crew.code,
        world.n1.code,
        world.n2.code,
        world.s1.code,
        world.bowed.code,
    )
    return {
        "visits": (
            "visit,module,happened_at,crew,left,note\n"
            f"T-1,{m},2024-01-10T09:00,{crew},running,\nT-2,{m},2024-03-01T10:30,{crew},running,bent by a branch\n"
        ),
        "fittings": (
            "fitting,module,position,part,serial,lot,fitted_on,age_at_fit,strokes_at_fit,fitted_visit,failed_on,"
            "removed_on,strokes_at_removal,reason,mode,found_by,last_good_on,caused_by,removed_visit\n"
            f"T-F1,{m},NUT,{n1},A1,L7,2024-01-10,50,100,T-1,,2024-03-01,5100,taken with another,,,,T-F2,T-2\n"
            f"T-F2,{m},SCREW,{s1},,,2024-01-10,,100,T-1,2024-02-28,2024-03-01,5100,failed,{mode},when needed,"
            "2024-02-20,,T-2\n"
            f"T-F3,{m},NUT,{n2},,,2024-03-01,,5100,T-2,,,,,,,,,\n"
        ),
        "findings": f"visit,position,finding,mode,note\nT-2,SCREW,failed,{mode},bowed\n",
        "stops": (
            f"module,stopped_at,running_at,reported_by,note\n{m},2024-02-28T09:00,2024-03-01T10:30,{crew},silent\n"
        ),
        "readings": (
            "module,read_at,counter,strokes,position,play_mm,visit\n"
            f"{m},2024-01-10T09:00,C1,100,,,T-1\n{m},2024-03-01T10:30,,5100,,,T-2\n"
            f"{m},2024-03-01T10:30,,,SCREW,0.4,T-2\n"
        ),
    }


def test_records_of_a_module_are_the_same_by_either_path(tmp_path: Path) -> None:
    world = make.Carriage()
    twin = make.make_module(type=world.type, site=world.site)
    tell_by_actions(world)
    work = bring_in(tmp_path, files_of_twin(world, twin))
    assert work.state == "done", work.result

    orders: dict[Any, list[str]] = {
        Visit: ["happened_at"],
        Fitting: ["fitted_on", "position__order"],
        Stop: ["stopped_at"],
        Reading: ["read_at", "position"],
        Placement: ["from_on"],
        ClockPoint: ["day"],
        FittingClock: ["fitted_day", "fitting__position__order"],
    }
    for model, order in orders.items():
        by_actions, by_files = (rows_of(model, order, module=each) for each in (world.module, twin))
        assert by_actions, model
        assert by_files == by_actions, model
    findings = [rows_of(Finding, ["id"], visit__module=each) for each in (world.module, twin)]
    assert findings[0] == findings[1] != []
    assert broken_rules() == []


def test_history_says_the_same(tmp_path: Path) -> None:
    """The last history row of each record is the record itself, by either path."""
    world = make.Carriage()
    twin = make.make_module(type=world.type, site=world.site)
    tell_by_actions(world)
    bring_in(tmp_path, files_of_twin(world, twin))

    for model in (Visit, Fitting, Finding, Stop, Placement):
        for record in model.objects.all():
            newest = record.history.first()
            # the site of a visit or stop is derived afterwards, without history
            names = [each.attname for each in model._meta.concrete_fields if (model, each.attname) not in DERIVED]
            assert [getattr(newest, name) for name in names] == [getattr(record, name) for name in names]
    for record in Fitting.objects.filter(module=twin):
        assert [(row.history_type, row.source) for row in record.history.all()] == [("+", "command")]


def test_the_catalogue_is_the_same_by_either_path(tmp_path: Path) -> None:
    """Two of each noun: one saved as the actions save it, one from a file, alike but for the code."""
    site = make.make_site(code="AA-9", name="Mill", zone="Europe/Lisbon", hours_per_day=20.5, reports_at_once=True)
    component = make.make_component(code="AA-1", name="Nut")
    mode = make.make_mode(code="AA-2", component=component, mechanism="wear", goes_to_bench=True)
    type_ = make.make_type(code="AA-3", cautions="Lock out.")
    position = make.make_position(code="AA-4", type=type_, component=component, order=7)
    part = make.make_part(code="AA-5", component=component, name="Lip", unit_cost="3.50", pack=5, fits_types=[type_])
    module = make.make_module(code="AA-6", type=type_, built_on=make.on("2024-01-01"))
    person = make.make_person(code="AA-7", name="Ann", role="crew", sites=[site])
    files = {
        "sites": "site,name,zone,hours_per_day,reports_at_once\nBB-9,Mill,Europe/Lisbon,20.5,yes\n",
        "components": "component,name,clock\nBB-1,Nut,strokes\n",
        "modes": "component,mode,mechanism,goes_to_bench\nAA-1,BB-2,wear,yes\n",
        "types": "type,cautions\nBB-3,Lock out.\n",
        "positions": "type,position,component,order\nAA-3,BB-4,AA-1,7\n",
        "parts": "part,component,name,unit_cost,pack,fits_types\nBB-5,AA-1,Lip,3.50,5,AA-3\n",
        "modules": "module,type,built_on\nBB-6,AA-3,2024-01-01\n",
        "people": "person,name,role,sites\nBB-7,Ann,crew,AA-9\n",
    }
    assert bring_in(tmp_path, files).state == "done"

    pairs: list[tuple[Any, Any, str]] = [
        (Site, site, "BB-9"), (Component, component, "BB-1"), (FailureMode, mode, "BB-2"), (ModuleType, type_, "BB-3"),
        (Position, position, "BB-4"), (Part, part, "BB-5"), (type(module), module, "BB-6"), (Person, person, "BB-7"),
    ]  # fmt: skip
    for model, told, code in pairs:
        told.refresh_from_db()
        twin = model.objects.get(code=code)
        assert without_code(twin) == without_code(told), model
        assert twin.code_order == told.code_order.replace("AA", "BB")
        assert twin.version == told.version
        newest = twin.history.first()
        assert (newest.history_type, newest.source, newest.code) == ("+", "command", code)
    assert set(Part.objects.get(code="BB-5").fits_types.all()) == {type_}
    assert [row.moduletype for row in Part.objects.get(code="BB-5").history.first().fits_types.all()] == [type_]
    assert [row.site for row in Person.objects.get(code="BB-7").history.first().sites.all()] == [site]


def without_code(record: Any) -> dict[str, Any]:
    return {name: value for name, value in plain(record).items() if name not in {"folded", "password"}}
