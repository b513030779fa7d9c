"""Redesigns and their rollout plans: what is refused, what is kept, and that two people do not overwrite each other."""

from __future__ import annotations

import pytest

from fleet.actions.errors import AlreadyDone, BadValue, ChangedSince, NotAllowed
from fleet.actions.plan_rollout import drop_step, move_step, plan_rollout
from fleet.actions.save_redesign import PartReplaced, save_redesign
from fleet.models import Part, Person, Redesign, RolloutStep
from tests.factories import Carriage, make_crew, make_module, make_part, make_planner, make_site, on

pytestmark = pytest.mark.django_db


@pytest.fixture
def world() -> Carriage:
    return Carriage()


def make_redesign(world: Carriage, **fields: object) -> Redesign:
    fields.setdefault("code", "LIP")
    return save_redesign(by=world.manager, changes=[PartReplaced(world.n2, [world.n1])], **fields)  # type: ignore[arg-type]


def replaced(redesign: Redesign) -> dict[str, set[str]]:
    return {line.new_part.code: set(line.replaces.values_list("code", flat=True)) for line in redesign.changes.all()}


def test_a_redesign_keeps_what_it_replaces_and_its_history(world: Carriage) -> None:
    redesign = make_redesign(world, name="wiper lip", hope=1.6)
    assert replaced(redesign) == {world.n2.code: {world.n1.code}}
    older = make_part(component=world.nuts)
    redesign = save_redesign(
        by=world.manager, redesign=redesign, version=1, changes=[PartReplaced(world.n2, [world.n1, older])]
    )
    assert replaced(redesign) == {world.n2.code: {world.n1.code, older.code}}
    assert (redesign.version, redesign.history.count()) == (2, 2)
    with pytest.raises(ChangedSince):
        save_redesign(by=world.manager, redesign=redesign, version=1, changes=[PartReplaced(world.n2, [older])])
    with pytest.raises(ChangedSince):
        save_redesign(by=world.manager, redesign=redesign, version=1, hope=2.0)
    assert replaced(redesign) == {world.n2.code: {world.n1.code, older.code}}
    assert save_redesign(by=world.manager, redesign=redesign, version=1, name="wiper lip").version == 2


def test_a_redesign_may_span_components(world: Carriage) -> None:
    s2 = make_part(component=world.screws)
    redesign = make_redesign(world)
    both = [PartReplaced(world.n2, [world.n1]), PartReplaced(s2, [world.s1])]
    redesign = save_redesign(by=world.manager, redesign=redesign, version=1, changes=both)
    assert replaced(redesign) == {world.n2.code: {world.n1.code}, s2.code: {world.s1.code}}
    redesign = save_redesign(by=world.manager, redesign=redesign, version=2, changes=both[:1])
    assert replaced(redesign) == {world.n2.code: {world.n1.code}}


def test_what_makes_no_redesign_is_refused(world: Carriage) -> None:
    def refuse(changes: list[PartReplaced], words: str, **fields: object) -> None:
        with pytest.raises(BadValue, match=words):
            save_redesign(by=world.manager, code="X", changes=changes, **fields)  # type: ignore[arg-type]
        assert not Redesign.objects.exists()

    fine = [PartReplaced(world.n2, [world.n1])]
    refuse([], "new part is missing")
    refuse([PartReplaced(world.n2, [])], "replaces is missing")
    refuse([PartReplaced(world.n2, [world.n2])], "cannot replace itself")
    refuse([PartReplaced(world.n2, [world.s1])], "same component")
    refuse([*fine, PartReplaced(make_part(component=world.nuts), [world.n1])], "Make a redesign of each")
    refuse(fine, "out of range", hope=0.5)
    refuse(fine, "out of range", hope=float("1e9"))
    refuse(fine, "no number", hope=float("nan"))


@pytest.mark.parametrize("who", ["crew", "contact"])
def test_only_the_office_plans(world: Carriage, who: str) -> None:
    person: Person = getattr(world, who)
    with pytest.raises(NotAllowed):
        save_redesign(by=person, code="X", changes=[PartReplaced(world.n2, [world.n1])])
    with pytest.raises(NotAllowed):
        plan_rollout(by=person, redesign=make_redesign(world), modules=[world.module])


def test_a_rollout_is_planned_by_the_week_and_added_to(world: Carriage) -> None:
    redesign = make_redesign(world)
    modules = [make_module(type=world.type, site=world.site) for _ in range(5)]
    steps = plan_rollout(
        by=world.manager, redesign=redesign, modules=modules, first_on=on("2026-01-05"), modules_a_week=2
    )
    assert [step.module for step in steps] == modules
    assert [str(step.planned_on) for step in steps] == [
        "2026-01-05", "2026-01-05", "2026-01-12", "2026-01-12", "2026-01-19",
    ]  # fmt: skip
    more = plan_rollout(by=world.manager, redesign=redesign, modules=[*modules, world.module])
    assert [(step.module, step.order, step.planned_on) for step in more] == [(world.module, 6, None)]
    assert all(step.history.count() == 1 for step in RolloutStep.objects.all())


def test_a_plan_needs_days_and_paces_that_make_sense(world: Carriage) -> None:
    redesign = make_redesign(world)
    for fields, words in (
        ({"modules_a_week": 2}, "first day is missing"),
        ({"first_on": on("2026-01-05"), "modules_a_week": 0}, "out of range"),
        ({"first_on": on("1026-01-05")}, "Check the year"),
        ({"first_on": on("9026-01-05")}, "Check the year"),
        ({"first_on": on("2126-01-05")}, "Check the year"),
    ):
        with pytest.raises(BadValue, match=words):
            plan_rollout(by=world.manager, redesign=redesign, modules=[world.module], **fields)  # type: ignore[arg-type]
    assert not RolloutStep.objects.exists()


def test_a_planner_of_one_site_plans_only_there(world: Carriage) -> None:
    planner = make_planner(sites=[world.site])
    elsewhere = make_module(type=world.type, site=make_site())
    redesign = make_redesign(world)
    with pytest.raises(NotAllowed):
        plan_rollout(by=planner, redesign=redesign, modules=[world.module, elsewhere])
    assert not RolloutStep.objects.exists()
    (step,) = plan_rollout(by=world.manager, redesign=redesign, modules=[elsewhere])
    with pytest.raises(NotAllowed):
        move_step(by=planner, step=step, planned_on=on("2026-02-02"))
    with pytest.raises(NotAllowed):
        drop_step(by=make_crew(world.site), step=step, reason="no")
    assert list(RolloutStep.objects.for_person(planner)) == []


def test_a_step_is_moved_and_taken_out_with_a_reason(world: Carriage) -> None:
    redesign = make_redesign(world)
    (step,) = plan_rollout(by=world.manager, redesign=redesign, modules=[world.module], first_on=on("2026-01-05"))
    step = move_step(by=world.manager, step=step, planned_on=on("2026-02-02"), version=1)
    with pytest.raises(ChangedSince):
        move_step(by=world.manager, step=step, planned_on=on("2026-03-02"), version=1)
    with pytest.raises(BadValue, match="reason is missing"):
        drop_step(by=world.manager, step=step, reason=" ")
    drop_step(by=world.manager, step=step, reason="sold", version=2)
    with pytest.raises(AlreadyDone, match="sold"):
        drop_step(by=world.manager, step=step, reason="sold")
    (again,) = plan_rollout(by=world.manager, redesign=redesign, modules=[world.module])
    assert (again.order, Part.objects.count()) == (2, 3)
