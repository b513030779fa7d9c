"""The forecast from the records: its parts agree with each other, and with a plain simulation of the same fleet."""

from __future__ import annotations

import datetime as dt
import random
from typing import Any

import numpy as np
import pytest

from fleet.actions.rebuild_clocks import rebuild_clocks
from reliability.forecasts.horizon import next_quarter, week_starts
from reliability.forecasts.next_quarter import forecast_document, question_of
from tests.reliability.small_fleet import SmallFleet, day

AS_OF = 500
SHAPE, SCALE = 2.0, 100.0


@pytest.mark.parametrize(
    ("today", "begin"),
    [
        ("2026-12-01", "2027-01-04"),
        ("2026-10-01", "2027-01-04"),
        ("2026-03-31", "2026-04-06"),
        ("2026-01-01", "2026-04-06"),
        ("2028-09-30", "2028-10-02"),
    ],
)
def test_next_quarter_begins_on_its_first_monday(today: str, begin: str) -> None:
    """Common practice: whole weeks, from Mondays."""
    found = next_quarter(dt.date.fromisoformat(today))
    assert (found.isoformat(), found.weekday()) == (begin, 0)


def test_weeks_cover_the_days_and_the_last_may_be_short() -> None:
    assert week_starts(21) == [0, 7, 14, 21]
    assert week_starts(10) == [0, 7, 10]
    assert week_starts(1) == [0, 1]


def lived_fleet(modules: int = 60, clock: str = "days") -> SmallFleet:
    """Nuts renewed at failure since day 0, at two sites; the second design follows the first from day 250 on."""
    fleet, dice = SmallFleet(clock), random.Random(5)
    fleet.n2.supersedes = fleet.n1
    fleet.n2.save()
    sites = [fleet.site("LOCK"), fleet.site("WEIR")]
    for number in range(modules):
        module = fleet.module(f"M-{number}", sites[number % 2])
        at = dice.randrange(100)
        while at < AS_OF:
            end = at + max(1, round(dice.weibullvariate(SCALE, SHAPE)))
            part = fleet.n1 if at < 250 else fleet.n2
            if end < AS_OF:
                fleet.fit(module, at, end, "failed", part=part, mode=fleet.worn)
            else:
                fleet.fit(module, at, part=part)
            at = end
    rebuild_clocks()
    return fleet


def told(fleet: SmallFleet, **asked: Any) -> dict[str, Any]:
    asked.setdefault("as_of", day(AS_OF))
    asked.setdefault("begin", day(AS_OF))
    return forecast_document(question_of(fleet.component, **asked))


@pytest.mark.django_db
def test_the_total_agrees_with_its_parts_sites_types_and_weeks() -> None:
    found = told(lived_fleet(), days=42, by_type=True)
    mean = found["total"]["mean"]
    for grouping in ("part", "site", "needed", "type"):
        assert sum(row["mean"] for row in found["groups"][grouping]) == pytest.approx(mean, rel=1e-6)
    assert sum(week["mean"] for week in found["weeks"]) == pytest.approx(mean, rel=1e-3)
    assert [week["from"] for week in found["weeks"]][:2] == [day(AS_OF).isoformat(), day(AS_OF + 7).isoformat()]
    assert [row["group"] for row in found["groups"]["needed"]] == ["N2"]


@pytest.mark.django_db
def test_bands_lie_within_each_other_and_hold_the_middle() -> None:
    total = told(lived_fleet(), days=91)["total"]
    (a, b), (c, d), (e, f) = (total["bands"][band] for band in ("0.95", "0.8", "0.5"))
    assert a <= c <= e <= total["median"] <= f <= d <= b
    assert total["plan_for"]["0.95"] >= total["median"]


@pytest.mark.django_db
def test_the_same_question_gives_the_same_answer() -> None:
    fleet = lived_fleet(20)
    assert told(fleet, days=30) == told(fleet, days=30)


@pytest.mark.django_db
def test_it_agrees_with_a_plain_simulation_of_the_fleet() -> None:
    """With plenty of failures the posterior stands close to the truth, so the truth's own counts are the reference."""
    fleet = lived_fleet(120)
    gap, days = 20, 63
    found = told(fleet, begin=day(AS_OF + gap), days=days)
    ages = [
        AS_OF - (each.fitted_on - day(0)).days
        for each in fleet.component.parts.get(code="N2").fittings.filter(removed_on=None)
    ]
    ages += [AS_OF - (each.fitted_on - day(0)).days for each in fleet.n1.fittings.filter(removed_on=None)]
    dice = np.random.default_rng(11)
    counts = np.zeros(1500)
    for age in ages:
        left = SCALE * ((age / SCALE) ** SHAPE + dice.exponential(size=counts.size)) ** (1 / SHAPE) - age
        while (left < gap + days).any():
            counts += (left >= gap) & (left < gap + days)
            left = np.where(left < gap + days, left + SCALE * dice.weibull(SHAPE, counts.size), left)
    assert found["total"]["mean"] == pytest.approx(counts.mean(), rel=0.08)
    low, high = found["total"]["bands"]["0.8"]
    spread = np.quantile(counts, [0.1, 0.9])
    assert high - low >= 0.95 * (spread[1] - spread[0])
    assert high - low <= 1.8 * (spread[1] - spread[0])


@pytest.mark.django_db
def test_removals_for_other_reasons_lower_the_failures_and_raise_the_parts_used() -> None:
    fleet = lived_fleet(60)
    plain = told(fleet, days=91)["total"]
    site = fleet.site("POND")
    for number in range(60):
        module = fleet.module(f"T-{number}", site)
        for at in range(0, 490, 35):
            fleet.fit(module, at, at + 35, "taken with another", part=fleet.n2)
    rebuild_clocks()
    taken = told(fleet, days=91, sites=["LOCK", "WEIR"])["total"]
    assert taken["parts_used"]["mean"] > taken["mean"] + 1
    assert taken["mean"] < plain["mean"]


@pytest.mark.django_db
def test_a_fleet_without_lives_says_so_and_counts_nothing() -> None:
    fleet = SmallFleet()
    found = told(fleet)
    assert (found["positions"], found["total"]["mean"], found["counted"]) == (0, 0.0, False)


@pytest.mark.django_db
def test_no_failure_yet_leaves_room_for_some() -> None:
    fleet = SmallFleet()
    site = fleet.site()
    for number in range(40):
        fleet.fit(fleet.module(f"M-{number}", site), 100)
    rebuild_clocks()
    found = told(fleet)
    assert found["failures_seen"] == 0
    assert 0 <= found["total"]["median"] <= 5
    assert found["total"]["bands"]["0.95"][1] >= 1


@pytest.mark.django_db
def test_a_design_without_a_life_borrows_its_components() -> None:
    fleet = lived_fleet(20)
    newest = fleet.component.parts.create(code="N3", supersedes=fleet.n2)
    fleet.fit(fleet.module("M-NEW", fleet.site("POND")), AS_OF, part=newest)
    rebuild_clocks()
    found = told(fleet, days=60)
    assert [row["group"] for row in found["groups"]["part"]] == ["N2", "N3"]
    assert any("No life of N3" in warning for warning in found["warnings"])
