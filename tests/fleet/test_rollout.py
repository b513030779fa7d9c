"""A rollout's plan on screen: modules put in by site or tag, what visits log counts as done, nothing half stored."""

from __future__ import annotations

import datetime as dt
from typing import Any

import pytest
from django.test import Client
from django.urls import reverse

from fleet.actions.plan_rollout import plan_rollout
from fleet.actions.save_redesign import PartReplaced, save_redesign
from fleet.models import Fitting, Redesign, RolloutStep
from fleet.rollout import by_site, upgraded_modules, upgraded_outside
from tests.factories import Carriage, make_fitting, make_module, make_planner, make_site, make_type, on

pytestmark = pytest.mark.django_db


class Rollout(Carriage):
    """The small world with a redesign of its nut."""

    def __init__(self) -> None:
        super().__init__()
        self.redesign = save_redesign(by=self.manager, code="LIP", changes=[PartReplaced(self.n2, [self.n1])])
        self.client = Client()
        self.client.force_login(self.manager)

    def more(self, count: int, **fields: Any) -> list[Any]:
        return [make_module(type=self.type, **{"site": self.site, **fields}) for _ in range(count)]

    def upgrade(self, module: Any, day: str, **fields: Any) -> Fitting:
        return make_fitting(module=module, position=self.nut, part=self.n2, fitted_on=on(day), **fields)

    def page(self, data: dict[str, Any] | None = None) -> Any:
        address = reverse("rollout", args=[self.redesign.code])
        return self.client.get(address) if data is None else self.client.post(address, data)


@pytest.fixture
def world() -> Rollout:
    return Rollout()


def test_what_visits_log_counts_as_done(world: Rollout) -> None:
    first, second, third = world.more(3)
    plan_rollout(by=world.manager, redesign=world.redesign, modules=[first, second], first_on=on("2025-01-06"))
    world.upgrade(first, "2025-01-08")
    world.upgrade(second, "2025-01-09", struck_out="wrong module")
    world.upgrade(third, "2025-02-01")
    found = upgraded_modules(world.redesign, [(each.pk, each.type_id) for each in (first, second)])
    assert (found[first.pk].done, found[first.pk].done_on) == (True, on("2025-01-08"))
    assert (found[second.pk].done, found[second.pk].upgraded) == (False, 0)
    assert upgraded_outside(world.redesign, {first.pk, second.pk}) == 1
    page = world.page().content.decode()
    assert "1 of 2 planned modules has the new part in every position." in page.replace("\u00a0", " ")
    assert "Past their planned day: 1." in page


def test_a_module_is_done_when_every_position_has_had_the_new_part(world: Rollout) -> None:
    from tests.factories import make_position

    other = make_position(type=world.type, code="NUT-2", component=world.nuts)
    world.upgrade(world.module, "2025-01-08")
    found = upgraded_modules(world.redesign, [(world.module.pk, world.type.pk)])[world.module.pk]
    assert (found.positions, found.upgraded, found.done, found.done_on) == (2, 1, False, None)
    make_fitting(module=world.module, position=other, part=world.n2, fitted_on=on("2025-03-01"))
    found = upgraded_modules(world.redesign, [(world.module.pk, world.type.pk)])[world.module.pk]
    assert (found.done, found.done_on) == (True, on("2025-03-01"))
    rows = by_site([("WEIR", on("2025-01-01"), found)], dt.date(2025, 4, 1))
    assert [(row.modules, row.done, row.late) for row in rows] == [(1, 1, 0)]


def test_modules_of_a_site_are_put_in_with_a_pace(world: Rollout) -> None:
    world.more(2)
    make_module(type=make_type(), site=world.site)  # holds no nut
    data = {"sites": [world.site.code], "first_on": "2026-01-05", "modules_a_week": "2"}
    assert world.page(data).status_code == 302
    assert RolloutStep.objects.count() == 3
    again = world.page(data)
    assert again.status_code == 422
    assert "all are in the plan already" in again.content.decode()
    assert RolloutStep.objects.count() == 3


def test_tags_are_told_apart_one_by_one(world: Rollout) -> None:
    (one,) = world.more(1)
    page = world.page({"tags": f"{one.code.lower()}, NO-SUCH"})
    assert page.status_code == 422
    assert "NO-SUCH is not in the book" in page.content.decode()
    assert not RolloutStep.objects.exists()
    assert world.page({"tags": f"{one.code.lower()}\n{world.module.code}"}).status_code == 302
    assert [step.module for step in RolloutStep.objects.all()] == [one, world.module]


@pytest.mark.parametrize(
    ("data", "words"),
    [
        ({}, "No module is named"),
        ({"sites": ["NOWHERE"]}, "This is not among the choices"),
        ({"tags": "x", "first_on": "soon"}, "This is no day"),
        ({"tags": "x", "modules_a_week": "0"}, "0 is too little"),
    ],
)
def test_a_plan_that_makes_no_sense_is_told_why(world: Rollout, data: dict[str, Any], words: str) -> None:
    page = world.page(data)
    assert page.status_code == 422
    assert words in page.content.decode()


def test_a_planner_of_one_site_neither_sees_nor_plans_elsewhere(world: Rollout) -> None:
    (elsewhere,) = world.more(1, site=make_site(code="FARAWAY"))
    plan_rollout(by=world.manager, redesign=world.redesign, modules=[elsewhere, world.module])
    world.client.force_login(make_planner(sites=[world.site]))
    page = world.page().content.decode()
    assert elsewhere.code not in page
    assert "FARAWAY" not in page
    assert world.module.code in page
    step = RolloutStep.objects.get(module=elsewhere)
    assert world.client.get(reverse("rollout_step", args=["LIP", step.pk])).status_code == 404
    assert world.page({"tags": elsewhere.code}).status_code == 422


def test_a_step_is_moved_and_taken_out_on_screen(world: Rollout) -> None:
    (step,) = plan_rollout(by=world.manager, redesign=world.redesign, modules=[world.module])
    move = reverse("rollout_step", args=["LIP", step.pk])
    assert world.client.post(move, {"planned_on": "2026-05-04", "version": 1}).status_code == 302
    late = world.client.post(move, {"planned_on": "2026-06-01", "version": 1})
    assert late.status_code == 422
    assert "since you opened it" in late.content.decode()
    drop = reverse("drop_step", args=["LIP", step.pk])
    assert world.client.post(drop, {"reason": "", "version": 2}).status_code == 422
    assert world.client.post(drop, {"reason": "sold", "version": 2}).status_code == 302
    assert "No module is planned yet." in world.page().content.decode()


def test_a_redesign_is_made_and_changed_on_screen(world: Rollout) -> None:
    data = {
        "code": "LIP-2", "name": "second lip", "new_parts": [world.n2.code], "replaced": [world.n1.code], "hope": "1.5",
        "visits_a_failure": "1", "bench_hours_a_failure": "0", "stop_days_a_failure": "1",
    }  # fmt: skip
    assert world.client.post(reverse("new_redesign"), data).status_code == 302
    made = Redesign.objects.get(code="LIP-2")
    assert [part.code for part in made.changes.get().replaces.all()] == [world.n1.code]
    edit = reverse("edit_redesign", args=["LIP-2"])
    opened = world.client.get(edit).content.decode()
    assert f'<option value="{world.n2.code}" selected>' in opened
    wrong = world.client.post(edit, {**data, "replaced": [world.s1.code], "version": 1})
    assert wrong.status_code == 422
    assert f"{world.s1.code} is not replaced" in wrong.content.decode()
    assert world.client.post(edit, {**data, "hope": "2", "version": 1}).status_code == 302
    assert Redesign.objects.get(code="LIP-2").hope == 2


def test_the_plan_goes_out_as_a_file(world: Rollout) -> None:
    plan_rollout(by=world.manager, redesign=world.redesign, modules=[world.module], first_on=on("2026-01-05"))
    answer = world.client.get(reverse("rollout", args=["LIP"]), {"as": "csv"})
    lines = b"".join(answer.streaming_content).decode("utf-8-sig").splitlines()
    assert lines[1] == f"1,{world.module.code},{world.site.code},2026-01-05,,1,0"
