"""Whether a redesign pays: two fleets of one world, a rollout of so many positions, and what the count rests on."""

from __future__ import annotations

import datetime as dt
import random
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.models import Fitting, Position
from reliability.forecasts.learned import learned
from reliability.redesign_money import avoided, more_or_less, rests_sentence
from reliability.redesigns.document import redesign_document
from reliability.redesigns.money import Costs, Plan, Side, money_of
from reliability.redesigns.money_basis import InStep, basis_of, lives_as
from reliability.redesigns.question import question_for
from reliability.stats.kept_draws import KeptDraws
from reliability.stats.posterior_draws import PosteriorDraws
from tests.reliability.rollout_fleet import TODAY, RolloutFleet
from tests.reliability.small_fleet import SmallFleet, day

pytestmark = pytest.mark.django_db
COSTS = Costs(1, 100, 0, 0, 0, 0, 40)


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


def side_of(fleet: SmallFleet, positions: int = 0, **fields: Any) -> Side:
    given: dict[str, Any] = {
        "component": fleet.component,
        "new": "N2",
        "old": "N1",
        "replaced": ("N1",),
        "old_cost": 10.0,
        "new_cost": 10.0,
        "positions": positions,
        "as_of": day(TODAY),
        "hope": 1.5,
    }
    return Side(**given | fields)


def money(fleet: SmallFleet, plan: Plan, rests_on: str = "", **fields: Any) -> dict[str, Any]:
    return money_of((side_of(fleet, plan.modules, **fields),), COSTS, plan, rests_on)


def estimated(fleet: SmallFleet, plan: Plan, rests_on: str = "", **fields: Any) -> dict[str, Any]:
    told: dict[str, Any] = money(fleet, plan, rests_on, **fields)["told"]["as estimated"]
    return told


def test_parts_that_run_already_count_alike_in_both_fleets() -> None:
    """Only what goes in from now on is decided on: nine tenths of the old life hardly shows within a quarter."""
    told = estimated(AllNew(), Plan(0, None), "hope", hope=0.9)
    assert abs(told["quarters"][0]["failures_avoided"]["mean"]) < 4


def test_a_plan_without_days_is_done_as_it_is_paid_at_once() -> None:
    fleet = RolloutFleet(3.0)
    none, undated, dated = (estimated(fleet, plan) for plan in (Plan(0, None), Plan(6, None), Plan(6, 6.0)))
    assert undated == dated
    assert undated["rollout_cost"] == 6 * (40 + 10)
    year = [sum(each["failures_avoided"]["mean"] for each in told["quarters"]) for told in (none, undated)]
    assert year[1] > year[0]


def test_no_more_is_changed_than_is_left_in_the_plan_and_paid_for() -> None:
    """Two a week for a week and two a week for a year are not the same benefit at the cost of two."""
    fleet = RolloutFleet(3.0)
    two, eight = (estimated(fleet, Plan(count, 2.0)) for count in (2, 8))
    assert (two["rollout_cost"], eight["rollout_cost"]) == (100, 400)
    avoided = [sum(each["failures_avoided"]["mean"] for each in told["quarters"][:2]) for told in (two, eight)]
    assert avoided[1] > avoided[0] + 0.5


def test_the_money_rests_on_the_same_dates_and_says_so() -> None:
    fleet = RolloutFleet(2.0)
    found = money(fleet, Plan(0, None))["bases"]["NUT"]
    assert found["name"] == "same dates"
    assert found["against"] == ["N1"]
    # the lower end is that of the ratio which the verdict's page tells first
    document = redesign_document(question_for("N2", as_of=day(TODAY)))
    assert found["lower"] == pytest.approx(document["same_dates"]["ratio"]["sites differ"]["median"]["lower"])
    assert found["ratio"]["lower"] < document["same_dates"]["ratio"]["sites differ"]["median"]["estimate"]
    said = plain(rests_sentence(side_of(fleet), found))
    assert said.startswith("Counted with the ratios of the same dates and sites, as the verdict: N2 over N1 ")
    low, high = (f"{found['ratio'][end]:.2f}" for end in ("lower", "upper"))
    assert f"N1 {low} to {high} times in 80 of 100 cases" in said


def test_where_only_all_history_tells_a_ratio_the_money_says_so() -> None:
    """Every site changed at once, and everything on one day: no old part ran beside a new one."""
    fleet = AllNew()
    assert money(fleet, Plan(0, None))["bases"]["NUT"]["name"] == "hope"
    begun = TODAY - 60
    Fitting.objects.filter(part=fleet.n2, fitted_on__lt=day(begun)).update(removed_on=day(begun), reason="failed")
    rebuild_clocks()
    fleet.component.refresh_from_db()
    found = money(fleet, Plan(0, None), not_before=day(begun))["bases"]["NUT"]
    assert (found["name"], found["why_not"]) == ("all history", "same dates")
    assert rests_sentence(side_of(fleet), found).startswith("Over the same dates no ratio can be told yet. Counted")


def test_all_history_and_the_hope_are_named_choices() -> None:
    fleet = RolloutFleet(2.0)
    names = [money(fleet, Plan(0, None), asked)["bases"]["NUT"]["name"] for asked in ("all history", "hope")]
    assert names == ["all history", "hope"]
    hoped = money(fleet, Plan(0, None), "hope")
    assert "at the lower bound" not in hoped["told"], "an assumption has no lower end"
    assert "hope, N2 over N1 1.50 times: an assumption" in plain(rests_sentence(side_of(fleet), hoped["bases"]["NUT"]))


def test_the_draws_of_the_new_part_carry_the_ratio_and_all_of_its_uncertainty() -> None:
    """Median of new over old in every draw is a draw of the ratio, for Weibull and for lognormal draws."""
    fleet = RolloutFleet(2.0)
    side, taught = side_of(fleet), learned(fleet.component, day(TODAY))
    stretch = basis_of(side, taught, "same dates").stretch
    assert stretch is not None
    lives = lives_as(taught, side, stretch).designs
    for deviations in (None, np.full(400, 0.4)):
        kept = taught.designs["N1"].life
        life = replace(kept, drawn=replace(kept.drawn, deviations=deviations))
        old, new = (InStep(life, each).draws(200, None) for each in (None, stretch))
        ratios = np.sort(medians(new) / medians(old))
        assert ratios == pytest.approx(np.sort(stretch.spread_over(200, np.random.default_rng(0)).medians), rel=1e-9)
    assert lives["N2"].life.draws(10, None).shapes.shape == (10,)


def medians(drawn: Any) -> Any:
    if drawn.deviations is not None:
        return drawn.scales
    return drawn.scales * np.log(2.0) ** (1.0 / drawn.shapes)


def test_failures_avoided_and_the_day_it_is_paid_agree_with_plain_simulation(monkeypatch: pytest.MonkeyPatch) -> None:
    """Forty old nuts of known ages, four of them changed a week; each draw of the life with luck of its own."""
    fleet = AllOld()
    plan, hope = Plan(40, 4.0), 2.0
    taught = only_weibull(learned(fleet.component, day(TODAY)))
    monkeypatch.setattr("reliability.redesigns.money.learned", lambda *asked: taught)
    told = estimated(fleet, plan, "hope", hope=hope)
    old = taught.designs["N1"].life.draws(200, np.random.default_rng(11))
    counted = np.array([plainly(old, draw, fleet.ages, hope, 100 + draw) for draw in range(200)])
    for quarter in (0, 1):
        mean = told["quarters"][quarter]["failures_avoided"]["mean"]
        alone = counted[:, quarter * 13 : quarter * 13 + 13].sum(axis=1)
        # both means are of 200 fleets
        assert mean == pytest.approx(alone.mean(), abs=4 * alone.std() * np.sqrt(2 / 200)), quarter
    saved = np.cumsum(counted * 110.0, axis=1) - 40 * 50 * np.minimum(np.arange(1, 53) * 4 / 40, 1.0)
    stays = np.array([np.flatnonzero(np.append(row < 0, True))[:-1].max(initial=-1) + 1 for row in saved])
    paid = dt.date.fromisoformat(told["break_even"]["estimate"])
    assert (paid - day(TODAY)).days / 7 == pytest.approx(np.median(stays) + 1, abs=3)
    low, high = np.quantile(stays, [0.1, 0.9]) + 1
    band = [(dt.date.fromisoformat(told["break_even"][end]) - day(TODAY)).days / 7 for end in ("lower", "upper")]
    assert band == pytest.approx([low, high], abs=4)


def only_weibull(taught: Any) -> Any:
    """The old part with a Weibull life in every draw, which the plain simulation below can follow by hand."""
    rng, design, none = np.random.default_rng(5), taught.designs["N1"], np.zeros(400)
    drawn = PosteriorDraws(rng.normal(3, 0.3, 400), rng.normal(85, 4, 400), none, {}, none)
    return replace(taught, designs={"N1": replace(design, life=KeptDraws(drawn, False, 40.0))})


class AllOld(RolloutFleet):
    """Forty modules at one site; old nuts lived 60 to 99 days, and those that run are 0 to 39 days old."""

    def __init__(self) -> None:
        SmallFleet.__init__(self, "days")
        self.position = Position.objects.create(type=self.type, code="NUT", component=self.component)
        site = self.site()
        self.ages = list(range(40))
        for number, age in enumerate(self.ages):
            module = self.module(f"M-{number}", site)
            began = TODAY - age
            lived = 60 + (number * 7) % 40
            self.put(module, self.n1, began - lived, began, "failed")
            self.put(module, self.n1, began, None, "")
        rebuild_clocks()


def plainly(old: Any, draw: int, ages: list[int], hope: float, seed: int) -> Any:
    """Failures avoided a week in one fleet: week by week what fails, then the next four nuts that are still old."""
    shape, scale = float(old.shapes[draw]), float(old.scales[draw])
    weeks = []
    for upgrades in (False, True):
        luck = [random.Random(seed * 1000 + number) for number in range(len(ages))]
        queue = random.Random(seed).sample(range(len(ages)), len(ages))

        def end(number: int, now: float, age: float, factor: float, luck: Any = luck) -> float:
            """The day on which a part of this age fails, its hazard ((age / scale) ** shape) being used up."""
            long = scale * factor
            return float(now - age + long * ((age / long) ** shape + luck[number].expovariate(1)) ** (1 / shape))

        is_new = [False] * len(ages)
        ends = [end(number, 0, age, 1) for number, age in enumerate(ages)]
        failed = np.zeros(52)
        for week in range(52):
            for number in range(len(ages)):
                while ends[number] <= 7 * week + 7:
                    failed[week] += 1
                    is_new[number] = upgrades
                    ends[number] = end(number, ends[number] + 0.5, 0, hope if upgrades else 1)
            for number in [each for each in queue if not is_new[each]][: 4 if upgrades else 0]:
                is_new[number] = True
                ends[number] = end(number, 7 * week + 7, 0, hope)
        weeks.append(failed)
    return weeks[0] - weeks[1]


@pytest.mark.parametrize(
    ("mean", "said"),
    [
        (1.2, "it avoids about 1 failure ("),
        (-1.2, "it brings about 1 more failure ("),
        (0.3, "it changes the number of failures by less than one ("),
    ],
)
def test_one_failure_and_none(mean: float, said: str) -> None:
    told = more_or_less({"mean": mean, "lower": mean - 1, "upper": mean + 1})
    assert plain(told).startswith(said)


def test_one_visit_is_one_visit() -> None:
    band = {"mean": 1.0, "lower": 0.0, "upper": 2.0}
    said = plain(avoided({"visits_avoided": band, "bench_hours_avoided": {"mean": 0.4, "lower": 0.0, "upper": 3.0}}))
    assert said == "Avoided with them in the next 13 weeks: 1 crew visit (0 to 2) and 0 bench hours (0 to 3)."


def plain(text: str) -> str:
    return text.replace("\u00a0", " ").replace("\u202f", " ")
