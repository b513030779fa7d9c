"""A module comes, moves and leaves; records belong to the site where it stood."""

from __future__ import annotations

from typing import Any

import pytest

from fleet.actions.errors import AlreadyDone, BadValue, ModuleElsewhere, NotAllowed
from fleet.actions.place_module import place_module
from fleet.actions.record_visit import record_visit
from fleet.actions.take_away_module import take_away_module
from fleet.models import Person, Placement
from tests.factories import Carriage, at, make_depot, make_planner, make_site, on

pytestmark = pytest.mark.django_db


def place(weir: Carriage, site: Any, day: str, **fields: Any) -> Placement:
    return place_module(by=weir.manager, module=weir.module, site=site, from_on=on(day), **fields)


def test_a_move_ends_the_stay_before(weir: Carriage) -> None:
    pond = make_site()
    place(weir, pond, "2024-03-01", bay="B-2")
    old, new = Placement.objects.order_by("from_on")
    assert (old.to_on, old.version) == (on("2024-03-01"), 2)
    assert (new.site, new.bay, new.to_on) == (pond, "B-2", None)


def test_on_the_day_of_a_move_a_visit_belongs_to_the_site_it_left(weir: Carriage) -> None:
    place(weir, make_site(), "2024-03-01")
    visit = record_visit(by=weir.manager, module=weir.module, happened_at=at("2024-03-01"))
    assert visit.site == weir.site


def test_a_field_stay_comes_before_a_depot_stay(weir: Carriage) -> None:
    pond = make_site()
    place(weir, make_depot(), "2024-02-01")
    place(weir, pond, "2024-03-01")
    visit = record_visit(by=weir.manager, module=weir.module, happened_at=at("2024-03-01"))
    assert visit.site == pond


def test_a_move_before_the_stay_began_is_refused(weir: Carriage) -> None:
    with pytest.raises(ModuleElsewhere, match="stands at WEIR"):
        place(weir, make_site(), "2019-03-01")


def test_two_moves_on_one_day_are_confirmed(weir: Carriage) -> None:
    depot, pond = make_depot(), make_site()
    place(weir, depot, "2024-03-01")
    with pytest.raises(ModuleElsewhere, match="that same day") as refusal:
        place(weir, pond, "2024-03-01")
    assert refusal.value.field == "same_day"
    place(weir, pond, "2024-03-01", same_day=True)
    assert Placement.objects.current().get().site == pond


def test_the_same_place_again_is_no_move_but_another_bay_is(weir: Carriage) -> None:
    with pytest.raises(ModuleElsewhere, match="already"):
        place(weir, weir.site, "2024-03-01")
    place(weir, weir.site, "2024-03-01", bay="B-2")
    assert Placement.objects.count() == 2


def test_taken_away_it_stands_nowhere(weir: Carriage) -> None:
    take_away_module(by=weir.manager, module=weir.module, to_on=on("2024-03-01"))
    with pytest.raises(AlreadyDone, match="stands at no site"):
        take_away_module(by=weir.manager, module=weir.module, to_on=on("2024-03-02"))
    with pytest.raises(ModuleElsewhere, match=r"to 1.March 2024"):
        place(weir, make_site(), "2024-02-01")
    place(weir, make_site(), "2024-04-01")
    visit = record_visit(by=weir.manager, module=weir.module, happened_at=at("2024-03-15"))
    assert visit.site is None


def test_it_does_not_leave_before_it_came(weir: Carriage) -> None:
    with pytest.raises(BadValue) as refusal:
        take_away_module(by=weir.manager, module=weir.module, to_on=on("2019-03-01"))
    assert refusal.value.field == "to_on"


@pytest.mark.parametrize(
    ("fields", "field"), [({"day": "2424-03-01"}, "from_on"), ({"bay": "b" * 41}, "bay"), ({"bay": "\x00"}, "bay")]
)
def test_a_wrong_move_is_refused_at_its_field(weir: Carriage, fields: dict[str, Any], field: str) -> None:
    with pytest.raises(BadValue) as refusal:
        place(weir, make_site(), **{"day": "2024-03-01", **fields})
    assert refusal.value.field == field
    assert Placement.objects.count() == 1


def test_the_future_is_the_sites_own(weir: Carriage, time_machine: Any) -> None:
    """At 11:00 UTC it is tomorrow already in Auckland, not yet in Lima."""
    time_machine.move_to(at("2024-03-01", "11:30"))
    with pytest.raises(BadValue, match="future"):
        place(weir, make_site(zone="America/Lima"), "2024-03-02")
    place(weir, make_site(zone="Pacific/Auckland"), "2024-03-02")


def test_a_scrapped_module_is_not_placed(weir: Carriage) -> None:
    weir.module.scrapped_on = on("2024-02-01")
    weir.module.save()
    with pytest.raises(BadValue, match="scrapped"):
        place(weir, make_site(), "2024-03-01")


def test_only_the_office_moves_modules_and_only_among_its_sites(weir: Carriage, rosa: Person) -> None:
    pond = make_site()
    half = make_planner(sites=[weir.site])
    for person in (rosa, weir.contact, half):
        with pytest.raises(NotAllowed):
            place_module(by=person, module=weir.module, site=pond, from_on=on("2024-03-01"))
    for person in (rosa, weir.contact):
        with pytest.raises(NotAllowed):
            take_away_module(by=person, module=weir.module, to_on=on("2024-03-01"))
