"""What the records teach beyond ages and lives, each in a small fleet where it matters."""

from __future__ import annotations

import datetime as dt
import math
import random
from typing import Any

import numpy as np
import pytest
from django.utils import timezone

from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.models import Component, Position
from reliability.forecasts.difference import difference_document
from reliability.forecasts.duty import duty
from reliability.forecasts.learned import learned
from reliability.forecasts.next_quarter import forecast_document, question_of
from reliability.forecasts.positions import Positions, positions_of
from reliability.forecasts.standing import stop_shares
from reliability.forecasts.what_if import WhatIf
from reliability.running_parts import running_parts
from tests.reliability.small_fleet import DAY_0, PLACED_LONG_BEFORE, SmallFleet, day

pytestmark = pytest.mark.django_db
AS_OF = 400


def live(fleet: SmallFleet, sites: list[Any], modules: int = 30, *, scale: float = 90.0, planned: int = 0) -> list[Any]:
    """Nuts renewed at failure (or when they reach the planned age) since day 0; the modules, in order."""
    dice = random.Random(3)
    made = []
    for number in range(modules):
        module = fleet.module(f"M-{number}", sites[number % len(sites)])
        made.append(module)
        at = dice.randrange(60)
        while at < AS_OF:
            life = max(1, round(dice.weibullvariate(scale, 2.5)))
            end = at + (min(life, planned) if planned else life)
            if end >= AS_OF:
                fleet.fit(module, at)
                break
            failed = not planned or life < planned
            fleet.fit(module, at, end, "failed" if failed else "planned", mode=fleet.worn if failed else None)
            at = end
    return made


def told(fleet: SmallFleet, **asked: Any) -> dict[str, Any]:
    rebuild_clocks()
    asked = {"as_of": day(AS_OF), "begin": day(AS_OF), "days": 91, **asked}
    return forecast_document(question_of(fleet.component, **asked))


def positions(fleet: SmallFleet, **asked: Any) -> Positions:
    rebuild_clocks()
    question = question_of(fleet.component, **{"as_of": day(AS_OF), "begin": day(AS_OF), "days": 91, **asked})
    rows = running_parts(fleet.component, as_of=question.as_of).rows
    return positions_of(rows, question, learned(fleet.component, question.as_of))


def test_failures_that_wait_for_visits_come_in_the_weeks_of_the_visits() -> None:
    """Crews come every 28 days, next on the tenth day: weeks without a visit bring nothing."""
    fleet = SmallFleet()
    site = fleet.site("WEIR", reports_at_once=False, visit_every_days=28, next_visit_on=day(AS_OF + 10))
    for module in live(fleet, [site]):
        for at in range(AS_OF - 18 - 28 * 12, AS_OF, 28):
            fleet.visit(module, at)
    weeks = [week["mean"] for week in told(fleet)["weeks"]]
    assert [place for place, mean in enumerate(weeks) if mean > 0.01] == [1, 5, 9]
    assert min(weeks[1], weeks[5], weeks[9]) > 3


def test_the_interval_between_visits_is_learned_where_nobody_entered_it() -> None:
    fleet = SmallFleet()
    site = fleet.site("WEIR", reports_at_once=False)
    for module in live(fleet, [site], 10):
        for at in range(AS_OF - 5 - 21 * 9, AS_OF, 21):
            fleet.visit(module, at)
    found = positions(fleet)
    assert {(place.every, place.next) for place in found.places} == {(21.0, 16.5)}


def test_a_rule_of_planned_replacement_is_seen_and_counted_apart() -> None:
    fleet = SmallFleet()
    live(fleet, [fleet.site()], planned=60)
    found = told(fleet)
    assert found["planned"]["mean"] > 20
    assert found["total"]["parts_used"]["mean"] == pytest.approx(found["total"]["mean"] + found["planned"]["mean"])
    assert learned(fleet.component, day(AS_OF)).rules["LOCK"].age == pytest.approx(60, abs=1)
    # and it is no rule where parts live on
    later = told(fleet, what_if=WhatIf(replace_at=1000.0))
    assert later["planned"]["mean"] < 0.01
    assert later["total"]["mean"] > 1.2 * found["total"]["mean"]


def test_a_site_that_has_not_come_so_far_goes_by_the_rule_of_the_others() -> None:
    fleet = SmallFleet()
    live(fleet, [fleet.site("LOCK"), fleet.site("MILL")], planned=60)
    young, old = fleet.site("POND"), fleet.site("WEIR")
    for number in range(10):
        fleet.fit(fleet.module(f"Y-{number}", young), AS_OF - 10)
        fleet.fit(fleet.module(f"O-{number}", old), AS_OF - 200)
    rebuild_clocks()
    places = positions(fleet).places
    assert [place.rule for place in places if place.site == "POND"] == [pytest.approx(60, abs=1)]
    assert {place.rule for place in places if place.site == "WEIR"} == {math.inf}
    (said,) = [warning for warning in told(fleet)["warnings"] if "planned replacement" in warning]
    assert said.startswith("POND has shown no planned replacement yet")
    assert "60 days" in said


def test_planned_removals_without_an_age_in_common_are_chance() -> None:
    fleet = SmallFleet()
    site = fleet.site()
    live(fleet, [site])
    for number, age in enumerate(range(5, 95, 6)):
        fleet.fit(fleet.module(f"P-{number}", site), 280, 280 + age, "planned")
    rebuild_clocks()
    taught = learned(fleet.component, day(AS_OF))
    assert taught.rules == {}
    assert taught.design("N1").removals > 0


def test_a_module_that_stands_still_gets_its_part_or_waits() -> None:
    """Past stops lasted four days and half of them ended with a new nut: so it is expected of this one."""
    fleet = SmallFleet()
    modules = live(fleet, [fleet.site()], 20)
    for number, module in enumerate(modules):
        nut = module.fittings.filter(reason="failed").order_by("removed_on").first()
        if nut is not None:
            at = (nut.removed_on - DAY_0).days if number % 2 else 340 + number
            fleet.stop(module, at - 4, at + 0.01)
    fleet.stop(modules[0], AS_OF - 1.0, None)
    found = positions(fleet)
    down = [(place.down, weight) for place, weight in zip(found.places, found.weights, strict=True) if place.down]
    waiting = [weight for place, weight in zip(found.places, found.weights, strict=True) if place.joins]
    assert len(down) == len(waiting) == 1
    assert down[0][0] == pytest.approx(2.0, abs=0.6)
    assert 0.2 < down[0][1] < 0.8
    assert down[0][1] + waiting[0] == pytest.approx(1.0)


def test_of_several_parts_in_a_module_that_stands_still_one_is_expected_to_have_failed() -> None:
    """Each stop of a module with three nuts ended with one new nut: a third for each of them."""
    fleet = SmallFleet()
    module = fleet.module("M-1", fleet.site())
    for _ in range(2):
        fleet.fit(module, 10)
    at = 20
    for _ in range(20):
        fleet.fit(module, at, at + 15, "failed", mode=fleet.worn)
        at += 15
        fleet.stop(module, at - 3, at + 0.01)
    fleet.fit(module, at)
    rebuild_clocks()
    assert stop_shares(fleet.component.pk, day(AS_OF), None) == pytest.approx(1 / 3, abs=0.02)


def test_modules_that_leave_take_their_failures_along_and_those_that_come_bring_theirs() -> None:
    today = timezone.localdate()
    now = (today - DAY_0).days
    fleet = SmallFleet()
    site, yard = fleet.site(), fleet.site("YARD", kind="depot")
    dice = random.Random(8)
    for number in range(40):
        module = fleet.module(f"M-{number}", site, placed=now - 500)
        at = now - 300
        while (end := at + max(1, round(dice.weibullvariate(70, 2.5)))) < now:
            fleet.fit(module, at, end, "failed", mode=fleet.worn)
            at = end
        fleet.fit(module, at)
    asked: dict[str, Any] = {"as_of": today, "begin": today}
    before = told(fleet, **asked)["total"]["mean"]
    leaving = fleet.type.modules.all()[:20]
    for module in leaving:
        module.placements.update(to_on=today + dt.timedelta(days=14))
    away = told(fleet, **asked)
    assert away["total"]["mean"] < 0.7 * before
    for module in leaving:
        module.placements.create(site=yard, from_on=today + dt.timedelta(days=14), to_on=today + dt.timedelta(days=28))
        module.placements.create(site=site, from_on=today + dt.timedelta(days=28))
    back = told(fleet, **asked)
    assert away["total"]["mean"] < back["total"]["mean"] < before
    assert back["positions"] == 40


def at_lock(found: Positions) -> list[tuple[float, float, float]]:
    """Least age, most, and how many."""
    rows = zip(found.ages, found.places, found.weights, strict=True)
    return [(age, place.oldest, weight) for age, place, weight in rows if place.site == "LOCK"]


def test_an_age_known_only_at_least_goes_by_what_lives_allow() -> None:
    """Lives of eighty days: twenty parts there for twenty days at least fail as often as parts of every age do."""
    fleet = SmallFleet()
    site = fleet.site(records_from=day(380))
    live(fleet, [fleet.site("MILL")])
    for number in range(20):
        fleet.fit(fleet.module(f"OLD-{number}", site, built_on=day(PLACED_LONG_BEFORE)), None)
    ((age, oldest, number),) = at_lock(positions(fleet))
    assert (age, number) == (19.0, 20.0)
    assert 1350 < oldest < 1450
    mean = told(fleet, days=28, sites=["LOCK"])["total"]["mean"]
    # survival from x to x + 28 days, x spread as S(x) beyond twenty days
    ages = np.linspace(20.0, 400.0, 4000)
    alive = np.exp(-((ages / 90.0) ** 2.5))
    later = np.exp(-(((ages + 28.0) / 90.0) ** 2.5))
    assert mean == pytest.approx(20.0 * (1.0 - later.sum() / alive.sum()), rel=0.12)


def test_under_a_rule_an_unknown_age_lies_below_it() -> None:
    fleet = SmallFleet()
    site = fleet.site(records_from=day(380))
    live(fleet, [fleet.site("MILL")])
    fleet.fit(fleet.module("OLD", site), None)
    found = at_lock(positions(fleet, what_if=WhatIf(replace_at=60.0)))
    assert sum(weight for _, _, weight in found) == pytest.approx(1.0)
    assert {oldest for _, oldest, _ in found} == {0.0}
    assert min(age for age, _, _ in found) >= 19.0
    assert max(age for age, _, _ in found) <= 60.0


def test_ages_stay_within_reason_where_no_part_has_failed_yet() -> None:
    """Without a failure the lives set no limit: ages of thousands of years made the first week the worst."""
    fleet = SmallFleet()
    site = fleet.site(records_from=day(300))
    for number in range(12):
        fleet.fit(fleet.module(f"NEW-{number}", site), 310)
        fleet.fit(fleet.module(f"OLD-{number}", site, built_on=day(100) if number % 2 else None), None)
    found = positions(fleet)
    assert max(found.ages) <= 101
    weeks = [week["mean"] for week in told(fleet)["weeks"]]
    assert max(weeks) < 2 * min(weeks)


def strokes_fleet(use: Any) -> SmallFleet:
    """Ten modules with a reading each week for three years; `use(day)` strokes a day."""
    fleet = SmallFleet("strokes")
    site = fleet.site()
    for number in range(6):
        module = fleet.module(f"M-{number}", site)
        fleet.fit(module, 1000)
        total = 0.0
        for at in range(0, 1100, 7):
            fleet.read(module, at, strokes=int(total))
            total += sum(use(each) for each in range(at, at + 7))
    rebuild_clocks()
    return fleet


def test_steady_duty_leaves_a_small_spread() -> None:
    strokes_fleet(lambda at: 500)
    found = duty("strokes", day(1095))
    assert found.season == []
    assert found.common < 0.06
    assert duty("days", day(1095)).spread == 0.0


def test_duty_that_strays_leaves_a_wide_spread() -> None:
    strokes_fleet(lambda at: 500 * (1.35 if at // 91 % 3 else 0.7))
    found = duty("strokes", day(1095))
    assert found.season == []
    assert found.common > 0.2


def test_a_season_that_comes_back_is_followed() -> None:
    """Half as much use in each winter half: after a summer the coming quarter counts with less."""
    strokes_fleet(lambda at: 300 if at % 364 < 182 else 600)
    found = duty("strokes", day(364 * 3))
    assert found.season
    assert found.factor(91) == pytest.approx(0.5, rel=0.06)
    assert found.common < 0.15


def test_drift_in_readings_is_followed() -> None:
    fleet = strokes_fleet(lambda at: 400 if at < 900 else 800)
    rows = running_parts(fleet.component, as_of=day(1095)).rows
    assert [row.a_day for row in rows] == pytest.approx([800] * len(rows), rel=0.05)


def test_parts_taken_along_come_in_threes() -> None:
    """Every second bowed screw took three nuts: the nuts' forecast has them, in lumps."""
    fleet = SmallFleet()
    site = fleet.site()
    screw = Component.objects.create(code="SCREW", name="Lead screw", clock="days")
    thread = screw.parts.create(code="S1")
    seat = Position.objects.create(type=fleet.type, code="S", component=screw)
    fleet.component.parts.filter(code="N2").delete()
    for number in range(24):
        module = fleet.module(f"M-{number}", site)
        end = 150 + 8 * number
        bowed = fleet.fit(module, 20, end, "failed", part=thread, mode=None)
        bowed.position = seat
        bowed.save()
        running = fleet.fit(module, end, part=thread)
        running.position = seat
        running.save()
        for _ in range(3):
            taken = number % 2 == 0
            cause = {"caused_by": bowed} if taken else {}
            fleet.fit(module, 20, end if taken else None, "taken with another" if taken else "", **cause)
            if taken:
                fleet.fit(module, end)
    found = told(fleet)
    total = found["total"]
    assert total["parts_used"]["mean"] > total["mean"] + 4
    taught = learned(fleet.component, day(AS_OF))
    assert [(each.component, each.none, each.taken) for each in taught.triggers] == [("SCREW", 12, [0, 0, 12])]
    assert taught.taken_share == 1.0
    low, high = total["parts_used"]["bands"]["0.8"]
    # counted one by one a band about so few parts would be much narrower than in threes
    assert high - low > 2.5 * 1.28 * (total["parts_used"]["mean"]) ** 0.5


def test_a_new_design_leans_on_the_earlier_ones_shape() -> None:
    fleet = SmallFleet()
    fleet.n2.supersedes = fleet.n1
    fleet.n2.save()
    site = fleet.site()
    live(fleet, [site])
    for number in range(12):
        module = fleet.module(f"N-{number}", site)
        if number < 3:
            fleet.fit(module, 300, 340 + number, "failed", part=fleet.n2, mode=fleet.worn)
        else:
            fleet.fit(module, 300, part=fleet.n2)
    found = told(fleet)
    (warning,) = [each for each in found["warnings"] if "leans on N1" in each]
    assert warning.startswith("N2 has failed 3 times so far.")


def test_the_superseding_part_goes_in_from_its_day_on() -> None:
    """A part that lives for ever: from at once, from a day, with retrofits; the difference has a band of its own."""
    fleet = SmallFleet()
    site = fleet.site()
    live(fleet, [site])
    for number in range(40):
        fleet.fit(fleet.module(f"N-{number}", site), 0, part=fleet.n2)
    base = told(fleet)["total"]["mean"]

    def asked(**figures: Any) -> tuple[float, dict[str, Any]]:
        what_if = WhatIf(superseding="N2", **figures)
        question = question_of(fleet.component, as_of=day(AS_OF), begin=day(AS_OF), days=91, what_if=what_if)
        return forecast_document(question)["total"]["mean"], difference_document(question)

    at_once, difference = asked()
    late, _ = asked(superseding_from=day(AS_OF + 45))
    retrofitted, fewer = asked(superseding_from=day(AS_OF), retrofit_a_week=5.0)
    assert retrofitted < at_once < late < base
    question = question_of(
        fleet.component,
        as_of=day(AS_OF),
        begin=day(AS_OF),
        days=91,
        what_if=WhatIf(superseding="N2", superseding_from=day(AS_OF + 45)),
    )
    needed = {row["group"]: row["parts_used"]["mean"] for row in forecast_document(question)["groups"]["needed"]}
    assert needed["N1"] > 5
    assert needed["N2"] > 5
    # without weeks the totals may be counted on another grid
    assert difference["mean"] == pytest.approx(at_once - base, abs=0.01)
    low, high = difference["bands"]["0.8"]
    assert low <= difference["mean"] <= high <= 0
    assert fewer["mean"] == pytest.approx(retrofitted - base, rel=0.1)
    assert fewer["planned"]["mean"] > 10


def test_more_duty_brings_more_failures_on_the_stroke_clock_only() -> None:
    fleet = strokes_fleet(lambda at: 500)
    site = fleet.site("MILL")
    for number in range(30):
        module = fleet.module(f"Q-{number}", site)
        fleet.read(module, 0, strokes=0)
        fleet.read(module, 1095, strokes=500 * 1095)
        for at in range(10 * (number % 5), 880, 110):
            fleet.fit(module, at, at + 70 + 3 * (number % 9), "failed", mode=fleet.worn)
    for number in range(30):
        fleet.fit(fleet.type.modules.get(code=f"Q-{number}"), 1000)
    rebuild_clocks()
    asked = {"as_of": day(1050), "begin": day(1050), "days": 91}
    base, more = (
        forecast_document(question_of(fleet.component, **asked, what_if=WhatIf(duty=factor))) for factor in (1.0, 1.3)
    )
    assert more["total"]["mean"] > 1.15 * base["total"]["mean"]
    fleet.component.clock = "days"
    fleet.component.save()
    still = forecast_document(question_of(fleet.component, **asked, what_if=WhatIf(duty=1.3)))
    assert any("counted in days" in each for each in still["warnings"])


def test_another_service_level_is_told_beside_the_usual_one() -> None:
    fleet = SmallFleet()
    live(fleet, [fleet.site()])
    plan = told(fleet, what_if=WhatIf(service_level=0.8))["total"]["parts_used"]["plan_for"]
    assert set(plan) == {"0.95", "0.8"}
    assert plan["0.8"] < plan["0.95"]
