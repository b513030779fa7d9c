"""The chance of failing before the next visit. Expected values follow from the Weibull's own formula, by hand."""

from __future__ import annotations

import datetime as dt
import math
from unittest import mock

import pytest
import time_machine
from django.test import Client
from django.urls import reverse

import reliability.chances
from fleet.actions.entries import CounterEntry, PartChange
from fleet.actions.record_visit import record_visit
from fleet.actions.report_stop import report_stop
from fleet.models import Fitting
from reliability.chances import FRESH_FOR, PartNow, chance_of, chances
from tests.factories import Carriage, make_bench, make_module

NOW = dt.datetime(2026, 3, 9, 12, 0, tzinfo=dt.UTC)
TODAY = NOW.date()


def design(shape: float = 2.0, scale: float = 100.0, failures: int = 9, count: int = 1) -> dict:
    return {"shapes": [shape] * count, "scales": [scale] * count, "failures": failures}


def test_the_formula_by_hand():
    """S(60)/S(50) with shape 2, scale 100: exp(-(0.36 - 0.25))."""
    chance = chance_of(design(), age=50.0, more=10.0)
    assert chance.estimate == pytest.approx(1 - math.exp(-0.11), rel=1e-12)
    assert chance.lower == chance.upper == pytest.approx(chance.estimate)
    assert chance.words == ""


def test_without_wear_the_age_does_not_matter():
    young, old = (chance_of(design(shape=1.0), age=age, more=30.0).estimate for age in (0.0, 900.0))
    assert young == pytest.approx(1 - math.exp(-0.3), rel=1e-12)
    assert old == pytest.approx(young, rel=1e-9)


def test_with_wear_it_grows_with_age_and_with_time():
    chance = [chance_of(design(), age=age, more=more).estimate for age, more in ((0, 10), (50, 10), (50, 20), (90, 20))]
    assert chance == sorted(chance)


def test_a_hard_site_counts_by_its_own_factor_and_a_new_one_by_the_spread():
    """1 - exp(-0.11 z): twice the hazard at the sandy site, between half and double where nothing is known."""
    sites = {**design(), "sites": {"TERN": [2.0]}, "new_site": [0.5]}
    assert chance_of(sites, 50.0, 10.0, "TERN").estimate == pytest.approx(1 - math.exp(-0.22), rel=1e-12)
    assert chance_of(sites, 50.0, 10.0, "ELSEWHERE").estimate == pytest.approx(1 - math.exp(-0.055), rel=1e-12)


def test_the_interval_holds_the_middle_of_the_draws():
    spread = {"shapes": [2.0] * 400, "scales": [50.0 + index for index in range(400)], "failures": 30}
    chance = chance_of(spread, age=20.0, more=20.0)
    ends = [chance_of(design(scale=scale), 20.0, 20.0).estimate for scale in (50 + 399 * 0.975, 50 + 399 * 0.025)]
    assert [chance.lower, chance.upper] == pytest.approx(ends, rel=2e-3)
    assert chance.lower < chance.estimate < chance.upper


def test_without_a_failure_only_the_upper_end_is_told():
    words = chance_of(design(shape=1.0, scale=10_000.0, failures=0), age=10.0, more=40.0).words
    assert words.replace("\u00a0", " ") == "under 1 %, no failure seen yet"


def test_what_lies_wholly_under_one_percent_is_told_in_words():
    assert chance_of(design(scale=1e4), age=10.0, more=40.0).words.replace("\u00a0", " ") == "under 1 %"
    spread = {"shapes": [2.0] * 40, "scales": [100.0 * (1 + index) for index in range(40)], "failures": 5}
    assert chance_of(spread, age=10.0, more=40.0).words == ""


def test_a_tiny_chance_of_a_huge_age_is_still_a_number():
    chance = chance_of(design(shape=8.0, scale=1e6), age=1e3, more=1.0)
    assert 0 <= chance.lower <= chance.estimate <= chance.upper < 1e-9
    assert chance_of(design(shape=8.0, scale=10.0), age=1e4, more=1e3).estimate == 1.0


@pytest.fixture
def weir(db) -> Carriage:
    """Eight modules whose nuts failed after some 60 days, each with a new nut that runs."""
    with time_machine.travel(NOW, tick=False):
        carriage = Carriage(code="KM-1", from_on=dt.date(2025, 12, 1))
        carriage.site.strokes_per_day, carriage.site.reports_at_once = 1000, True
        carriage.site.next_visit_on = dt.date(2026, 3, 24)
        carriage.site.save()
        modules = [carriage.module] + [
            make_module(type=carriage.type, site=carriage.site, from_on=dt.date(2025, 12, 1)) for _ in range(7)
        ]
        for index, module in enumerate(modules):
            carriage.module = module
            carriage.fit(carriage.n1, "2025-12-01")
            day = dt.datetime(2026, 1, 20, 12, 0, tzinfo=dt.UTC) + dt.timedelta(days=3 * index)
            change = PartChange(position=carriage.nut, reason="failed", mode=carriage.worn, part=carriage.n1)
            days = (day.date() - dt.date(2025, 12, 1)).days
            record_visit(
                by=carriage.manager,
                module=module,
                happened_at=day,
                known_on=day.date(),
                counter=CounterEntry(strokes=1000 * days),
                changes=[change],
            )
        carriage.module = modules[0]
        yield carriage


def page(person):
    client = Client()
    client.force_login(person)
    return client.get(reverse("module", args=["KM-1"]))


def test_the_page_tells_it_to_those_who_may_know(weir):
    for person in (weir.manager, weir.crew):
        answer = page(person)
        nut = next(row for row in answer.context["fitted"] if row.position == weir.nut)
        assert 0.02 < nut.chance.lower < nut.chance.estimate < nut.chance.upper < 0.95
        text = answer.content.decode().replace("\u00a0", " ")
        assert "the chance that it fails before the visit planned for 24 March 2026" in text
        assert "Fails before 24 Mar" in text
    for person in (weir.contact,):
        answer = page(person)
        assert "chance" not in answer.content.decode()
        assert all(row.chance is None for row in answer.context["fitted"])


def test_it_is_the_chance_of_this_age_and_this_duty(weir):
    nut = next(row for row in page(weir.manager).context["fitted"] if row.position == weir.nut)
    told = reliability.chances.design_lives(weir.nuts.code, TODAY)
    used = (NOW - dt.datetime(2026, 1, 20, 12, 0, tzinfo=dt.UTC)).days * 1000
    again = chance_of(told[weir.n1.code], age=used, more=15 * 1000.0)
    assert nut.chance.estimate == pytest.approx(again.estimate, rel=0.05)
    assert told[weir.n1.code]["failures"] == 8


def test_a_design_without_a_life_of_its_own_borrows_its_components(weir):
    part = PartNow(position=7, component=weir.nuts.code, part=weir.n2.code, age=1e4, a_day=1e3)
    own = PartNow(position=8, component=weir.nuts.code, part=weir.n1.code, age=1e4, a_day=1e3)
    found = chances([part, own], days=15, as_of=TODAY)
    assert found[7].estimate == pytest.approx(found[8].estimate, rel=1e-9)


def test_no_life_no_time_or_no_duty_means_no_chance(weir):
    screw = PartNow(position=1, component=weir.screws.code, part=weir.s1.code, age=10, a_day=1)
    assert chances([screw], days=15, as_of=TODAY) == {}
    nut = PartNow(position=1, component=weir.nuts.code, part=weir.n1.code, age=10, a_day=1000)
    assert chances([nut], days=0, as_of=TODAY) == {}
    idle = PartNow(position=1, component=weir.nuts.code, part=weir.n1.code, age=10, a_day=0)
    assert chances([idle], days=15, as_of=TODAY) == {}


def test_a_module_that_stands_still_has_none(weir):
    report_stop(by=weir.crew, module=weir.module, stopped_at=NOW - dt.timedelta(hours=2))
    answer = page(weir.manager)
    assert "chances_shown" not in answer.context
    assert all(row.chance is None for row in answer.context["fitted"])


def test_a_test_stand_has_none(weir):
    weir.site.kind = "rig"
    weir.site.save()
    assert all(row.chance is None for row in page(weir.manager).context["fitted"])


def test_a_part_of_unknown_age_has_none(weir):
    Fitting.objects.filter(module=weir.module).delete()
    Fitting.objects.create(code="F-OLD", module=weir.module, position=weir.nut, part=weir.n1)
    nut = next(row for row in page(weir.manager).context["fitted"] if row.position == weir.nut)
    assert nut.chance is None


def test_without_a_planned_visit_it_looks_thirty_days_ahead(weir):
    weir.site.next_visit_on = dt.date(2026, 1, 1)
    weir.site.save()
    assert "Fails within 30 days" in page(weir.manager).content.decode()


def test_the_lives_behind_it_are_read_for_six_hours(weir):
    page(weir.manager)
    with mock.patch.object(reliability.chances, "learn", wraps=reliability.chances.learn) as learn:
        page(weir.manager)
        assert learn.call_count == 0
        with time_machine.travel(NOW + FRESH_FOR + dt.timedelta(minutes=1), tick=False):
            page(weir.manager)
        assert learn.call_count == 1


def test_the_bench_sees_none(weir):
    assert page(make_bench(weir.site)).status_code == 404
