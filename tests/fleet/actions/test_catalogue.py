"""Sites, components, modes, types, positions, parts and modules: saved by the office, each with its version."""

from __future__ import annotations

from decimal import Decimal
from typing import Any

import pytest

from fleet.actions.entries import PartChange
from fleet.actions.errors import BadValue, ChangedSince, NotAllowed
from fleet.actions.record_visit import record_visit
from fleet.actions.report_stop import report_stop
from fleet.actions.save_component import save_component
from fleet.actions.save_mode import save_mode
from fleet.actions.save_module import save_module
from fleet.actions.save_part import save_part
from fleet.actions.save_position import save_position
from fleet.actions.save_site import save_site
from fleet.actions.save_type import save_type
from fleet.models import ClockPoint, Fitting, Module, Person, Placement, Site, Stop
from fleet.rights import seen_by
from tests.factories import (
    Carriage,
    at,
    make_component,
    make_mode,
    make_planner,
    make_position,
    make_site,
    make_type,
    on,
)
from tests.fleet.invariants import broken_rules

pytestmark = pytest.mark.django_db


def test_a_site_is_made_and_changed_with_its_history(ines: Person) -> None:
    site = save_site(by=ines, code=" alder-1 ", name="Alder Sluice", kind="field", zone="Europe/Lisbon")
    assert (site.code, site.version) == ("ALDER-1", 1)
    site = save_site(by=ines, site=site, version=1, name="Alder Lock", next_visit_on=on("2027-01-01"))
    assert (site.name, site.version, site.history.count()) == ("Alder Lock", 2, 2)
    with pytest.raises(ChangedSince, match="Alder Sluice → Alder Lock"):
        save_site(by=ines, site=site, version=1, name="Alder Gate")
    assert save_site(by=ines, site=site, version=1, name="Alder Lock").version == 2
    with pytest.raises(BadValue, match="more than ten years ahead"):
        save_site(by=ines, site=site, version=2, next_visit_on=on("9999-12-31"))


@pytest.mark.parametrize(
    ("fields", "field"),
    [
        ({"code": ""}, "code"),
        ({"code": "no code"}, "code"),
        ({"code": "x" * 10_000}, "code"),
        ({"code": "TAKEN"}, "code"),
        ({"name": "x" * 121}, "name"),
        ({"name": "a\x00"}, "name"),
        ({"kind": "moon"}, "kind"),
        ({"zone": "Moon/Sea"}, "zone"),
        ({"records_from": on("2424-01-01")}, "records_from"),
        ({"strokes_per_day": -1.0}, "strokes_per_day"),
        ({"strokes_per_day": float("inf")}, "strokes_per_day"),
        ({"hours_per_day": 25.0}, "hours_per_day"),
        ({"visit_every_days": 0}, "visit_every_days"),
        ({"visit_every_days": 10**12}, "visit_every_days"),
        ({"reports_at_once": "perhaps"}, "reports_at_once"),
        ({"colour": "red"}, "colour"),
    ],
)
def test_a_wrong_site_is_refused_at_its_field(ines: Person, fields: dict[str, Any], field: str) -> None:
    make_site(code="TAKEN")
    with pytest.raises(BadValue) as refusal:
        save_site(by=ines, **{"code": "ALDER", **fields})
    assert refusal.value.field == field
    assert not Site.objects.filter(code="ALDER").exists()


def test_a_sites_zone_and_duty_move_the_clocks_of_its_modules(weir: Carriage, ines: Person) -> None:
    weir.fit()
    assert not ClockPoint.objects.exclude(strokes=None).exists()
    save_site(by=ines, site=weir.site, strokes_per_day=400.0)
    assert ClockPoint.objects.exclude(strokes=None).exists()


def test_a_planner_of_some_sites_sees_the_site_just_made_and_no_other(weir: Carriage) -> None:
    half = make_planner(sites=[make_site()])
    made = save_site(by=half, code="MINE")
    assert made in seen_by(half, Site)
    with pytest.raises(NotAllowed, match="none of yours"):
        save_site(by=half, site=weir.site, name="other")


def test_crew_bench_and_contact_keep_off_the_catalogue(weir: Carriage, rosa: Person) -> None:
    for person in (rosa, weir.contact):
        for save in (save_site, save_component, save_mode, save_type, save_position, save_part, save_module):
            with pytest.raises(NotAllowed):
                save(by=person, code="X")


def test_a_component_keeps_its_clock_while_used_parts_carry_ages(weir: Carriage, ines: Person) -> None:
    assert save_component(by=ines, component=weir.nuts, clock="hours").clock == "hours"
    weir.fit(age_at_fit=50)
    with pytest.raises(BadValue, match="carry ages in hours"):
        save_component(by=ines, component=weir.nuts, clock="days")
    with pytest.raises(BadValue, match="Choose one of: days, hours, strokes"):
        save_component(by=ines, code="NEW", clock="moons")
    with pytest.raises(BadValue, match="missing"):
        save_component(by=ines, code="NEW")


def test_codes_of_modes_and_positions_are_told_apart_within_their_owner(weir: Carriage, ines: Person) -> None:
    save_mode(by=ines, component=weir.screws, code=weir.worn.code)
    with pytest.raises(BadValue, match="exists already"):
        save_mode(by=ines, component=weir.nuts, code=weir.worn.code)
    save_position(by=ines, type=make_type(), code="NUT", component=weir.nuts)
    with pytest.raises(BadValue, match="exists already"):
        save_position(by=ines, position=weir.screw, code="nut")
    for save, missing in ((save_mode, "component"), (save_position, "type"), (save_part, "component")):
        with pytest.raises(BadValue) as refusal:
            save(by=ines, code="LONE")
        assert refusal.value.field == missing


def test_what_records_name_keeps_its_owner(weir: Carriage, ines: Person) -> None:
    weir.fit()
    change = PartChange(position=weir.nut, reason="failed", mode=weir.worn, part=weir.n2)
    record_visit(by=ines, module=weir.module, happened_at=at("2024-03-09"), changes=[change])
    other = make_component()
    for save, noun, name, value in (
        (save_mode, {"mode": weir.worn}, "component", other),
        (save_position, {"position": weir.nut}, "component", other),
        (save_position, {"position": weir.nut}, "type", make_type()),
        (save_part, {"part": weir.n1}, "component", other),
        (save_module, {"module": weir.module}, "type", make_type()),
    ):
        with pytest.raises(BadValue) as refusal:
            save(by=ines, **noun, **{name: value})
        assert refusal.value.field == name
    unused = make_mode(component=weir.nuts)
    assert save_mode(by=ines, mode=unused, component=weir.screws).component == weir.screws
    assert save_position(by=ines, position=make_position(), component=other).component == other


def test_a_part_supersedes_one_of_its_own_component_and_never_itself(weir: Carriage, ines: Person) -> None:
    with pytest.raises(BadValue, match="another component"):
        save_part(by=ines, part=weir.n2, supersedes=weir.s1)
    with pytest.raises(BadValue, match="supersede itself"):
        save_part(by=ines, part=weir.n1, supersedes=weir.n2)
    newest = save_part(by=ines, code="N-3", component=weir.nuts, supersedes=weir.n2, unit_cost=Decimal("12.50"))
    assert newest.unit_cost == Decimal("12.50")


def test_the_types_a_part_fits_are_kept_in_its_history(weir: Carriage, ines: Person) -> None:
    part = save_part(by=ines, code="N-3", component=weir.nuts, fits_types=[weir.type])
    assert list(part.fits_types.all()) == [weir.type]
    part = save_part(by=ines, part=part, version=1, fits_types=[])
    assert (part.fits_types.count(), part.version) == (0, 2)
    assert part.history.earliest().fits_types.count() in {0, 1}
    with pytest.raises(BadValue) as refusal:
        save_part(by=ines, part=part, version=2, unit_cost=Decimal("-1"))
    assert refusal.value.field == "unit_cost"
    for wrong in (Decimal("NaN"), Decimal("1e20"), "many"):
        with pytest.raises(BadValue):
            save_part(by=ines, part=part, version=2, unit_cost=wrong)


def test_a_type_is_made_with_its_cautions(ines: Person) -> None:
    made = save_type(by=ines, code="BC-2", cautions="Lock out before opening.")
    with pytest.raises(BadValue) as refusal:
        save_type(by=ines, type=made, version=1, cautions="x" * 10_000)
    assert refusal.value.field == "cautions"


def test_a_new_module_is_placed_at_once(weir: Carriage, ines: Person) -> None:
    module = save_module(by=ines, code="M-NEW", type=weir.type, site=weir.site, from_on=on("2024-03-01"), bay="B-1")
    stay = Placement.objects.get(module=module)
    assert (stay.site, stay.bay) == (weir.site, "B-1")
    half = make_planner(sites=[weir.site])
    with pytest.raises(BadValue) as refusal:
        save_module(by=half, code="M-LOST", type=weir.type)
    assert refusal.value.field == "site"
    with pytest.raises(NotAllowed):
        save_module(by=half, code="M-LOST", type=weir.type, site=make_site(), from_on=on("2024-03-01"))
    assert not Module.objects.filter(code="M-LOST").exists()


def test_a_scrapped_module_leaves_its_site_and_its_parts_are_withdrawn(weir: Carriage, ines: Person) -> None:
    fitting = weir.fit()
    report_stop(by=ines, module=weir.module, stopped_at=at("2024-03-01"))
    save_module(by=ines, module=weir.module, version=1, scrapped_on=on("2024-03-09"))
    fitting.refresh_from_db()
    assert (fitting.removed_on, fitting.reason) == (on("2024-03-09"), "module withdrawn")
    assert Placement.objects.get().to_on == on("2024-03-09")
    assert not Stop.objects.now().exists()
    assert broken_rules() == []


def test_a_module_is_not_scrapped_before_nor_built_after_its_records(weir: Carriage, ines: Person) -> None:
    weir.fit(weir.n1, "2024-03-01")
    for field, day in (("scrapped_on", "2024-02-01"), ("built_on", "2024-02-01"), ("scrapped_on", "2424-01-01")):
        with pytest.raises(BadValue) as refusal:
            save_module(by=ines, module=weir.module, **{field: on(day)})
        assert refusal.value.field == field
    assert Fitting.objects.running().count() == 1
