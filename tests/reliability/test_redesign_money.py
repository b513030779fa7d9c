"""Whether a redesign pays: two fleets of one world, a rollout of so many positions, and what the count rests on."""

from __future__ import annotations

from typing import Any

import pytest

from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.models import Position
from reliability import redesign_words as words
from reliability.redesigns.money import Costs, Plan, money_of
from tests.reliability.rollout_fleet import TODAY, RolloutFleet
from tests.reliability.small_fleet import SmallFleet, day

pytestmark = pytest.mark.django_db
COSTS = Costs(10, 10, 1, 100, 0, 0, 0, 0, 40)


class AllNew(RolloutFleet):
    """Forty modules whose old nuts lived about 100 days and whose new ones, all running, are 60 to 98 days old."""

    def __init__(self) -> None:
        SmallFleet.__init__(self, "days")
        self.n2.supersedes = self.n1
        self.n2.save()
        self.position = Position.objects.create(type=self.type, code="NUT", component=self.component)
        site = self.site()
        for number in range(40):
            module = self.module(f"M-{number}", site)
            began = TODAY - 60 - number
            for lived, start in ((80 + number, began - 240), (100 + number // 2, began - 120)):
                self.put(module, self.n1, start, start + lived, "failed")
            self.put(module, self.n2, began, None, "")
        rebuild_clocks()


def money(fleet: SmallFleet, plan: Plan, **choices: Any) -> dict[str, Any]:
    found = money_of(fleet.component, "N2", "N1", as_of=day(TODAY), costs=COSTS, plan=plan, **choices)["told"]
    assert found is not None
    return found


def test_parts_that_run_already_count_alike_in_both_fleets() -> None:
    """Only what goes in from now on is decided on: nine tenths of the old life hardly shows within a quarter."""
    told = money(AllNew(), Plan(0, 0, None), lower_ratio=0.9)["at the lower bound"]
    assert abs(told["quarters"][0]["failures_avoided"]["mean"]) < 4


def test_a_plan_without_days_is_done_as_it_is_paid_at_once() -> None:
    fleet = RolloutFleet(3.0)
    none, undated, dated = (
        money(fleet, plan)["as estimated"] for plan in (Plan(0, 0, None), Plan(6, 6, None), Plan(6, 6, 6.0))
    )
    assert undated == dated
    assert undated["rollout_cost"] == 6 * (40 + 10)
    year = [sum(each["failures_avoided"]["mean"] for each in told["quarters"]) for told in (none, undated)]
    assert year[1] > year[0]


def test_no_more_is_changed_than_is_left_in_the_plan_and_paid_for() -> None:
    """Two a week for a week and two a week for a year are not the same benefit at the cost of two."""
    fleet = RolloutFleet(3.0)
    two, eight = (money(fleet, Plan(count, count, 2.0))["as estimated"] for count in (2, 8))
    assert (two["rollout_cost"], eight["rollout_cost"]) == (100, 400)
    avoided = [sum(each["failures_avoided"]["mean"] for each in told["quarters"][:2]) for told in (two, eight)]
    assert avoided[1] > avoided[0] + 0.5


def test_the_count_says_how_long_it_takes_the_new_part_to_live() -> None:
    told = money(RolloutFleet(2.0), Plan(0, 0, None))["as estimated"]
    taken = told["taken_ratio"]
    assert taken["lower"] < 2.0 < taken["upper"]
    document = {"component": "NUT", "component_name": "Drive nut", "new": ["N2"], "old": ["N1"]}
    said = words.taken_sentence(told, document)
    assert said.startswith(f"This takes the N2 drive nuts to last {words.times_of(taken['estimate'])} times as long")
    assert words.taken_sentence({"taken_ratio": None}, document) == ""


@pytest.mark.parametrize(
    ("mean", "said"),
    [
        (1.2, "it avoids about 1 failure ("),
        (-1.2, "it brings about 1 more failure ("),
        (0.3, "it changes the number of failures by less than one ("),
    ],
)
def test_one_failure_and_none(mean: float, said: str) -> None:
    told = words.more_or_less({"mean": mean, "lower": mean - 1, "upper": mean + 1})
    assert told.replace("\u00a0", " ").startswith(said)
