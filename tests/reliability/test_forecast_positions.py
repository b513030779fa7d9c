"""Running parts as the lines of a count: what shares a line loses no use, and the rules of a site follow its pace."""

from __future__ import annotations

import datetime as dt
import random
from collections import defaultdict

import numpy as np
import pytest

from fleet.models import Clock, Component
from reliability.forecasts.duty import Duty
from reliability.forecasts.learned import ALL, Design, Learned
from reliability.forecasts.positions import MOST_PACES, Place, _shared_paces, positions_of
from reliability.forecasts.question import question_of
from reliability.forecasts.standing import Standing
from reliability.forecasts.what_if import UnusableWhatIf, WhatIf
from reliability.running_parts import RunningRow
from reliability.stats.kept_draws import KeptDraws
from reliability.stats.posterior import KnownWeibull
from tests.reliability.small_fleet import SmallFleet
from tests.reliability.test_forecast_effects import live, positions


def place(site: str, pace: float) -> Place:
    return Place(
        site=site,
        type="A",
        part="N1",
        needed="N1",
        pace=pace,
        rule=60.0,
        rule_per_pace=1.0,
        every=0.0,
        next=0.0,
        down=0.0,
        joins=0.0,
        leaves=float("inf"),
        upgrading=False,
    )


@pytest.mark.parametrize("sites", [3, 50, 100])
def test_shared_paces_lose_no_use_and_stay_few(sites: int) -> None:
    dice = random.Random(4)
    entries = [
        (place(f"S{number % sites}", dice.lognormvariate(6.0, 0.5)), 0.0, 1.0 + number % 2) for number in range(4000)
    ]
    shared = _shared_paces(entries)
    assert len({(each.site, pace) for (each, _, _), pace in zip(entries, shared, strict=True)}) <= max(
        MOST_PACES, 2 * sites
    )
    use: dict[str, list[float]] = defaultdict(lambda: [0.0, 0.0])
    for (each, _, weight), pace in zip(entries, shared, strict=True):
        use[each.site][0] += weight * each.pace
        use[each.site][1] += weight * pace
    for before, after in use.values():
        assert after == pytest.approx(before, rel=1e-9)


def test_paces_of_few_sites_stay_near_their_own() -> None:
    entries = [(place("S", pace), 0.0, 1.0) for pace in (98.0, 100.0, 200.0, 400.0)]
    assert _shared_paces(entries) == pytest.approx([99.0, 99.0, 200.0, 400.0])


@pytest.mark.parametrize(
    ("clock", "a_day", "first", "expected"),
    [("days", 1.0, 1, 40.0), ("days", 1.0, 4, 43.0), ("strokes", 80.0, 1, 41.0 * 80)],
)
def test_a_part_is_as_old_as_the_first_morning_finds_it(
    clock: Clock, a_day: float, first: int, expected: float
) -> None:
    """Whole days end with the day; a count is told of the morning of the as-of day."""
    today = dt.date(2026, 3, 2)
    life = KeptDraws.of(KnownWeibull(2.0, 9000.0), 1, np.random.default_rng(1))
    learned = Learned(
        failures=9,
        designs={ALL: Design(life, failures=9, removals=0.0, upgrades=0.0, typical=9000.0)},
        taken_share=0.0,
        rules={},
        visits={},
        standing=Standing({}, 1.0, []),
        stop_share=0.0,
        duty=Duty(0.0, 0.0, []),
        triggers=[],
    )
    row = RunningRow(age=40 * a_day, a_day=a_day, part="N1", needed="N1", site="LOCK", type="A", count=1)
    asked = question_of(
        Component(code="NUT", clock=clock), as_of=today, begin=today + dt.timedelta(days=first), days=10
    )
    found = positions_of([row], asked, learned)
    assert (found.ages + asked.gap * a_day).tolist() == pytest.approx([expected])


@pytest.mark.django_db
def test_parts_changed_more_than_once_a_week_are_not_counted() -> None:
    """Each change of each part would be drawn: at an age of one stroke a page took minutes."""
    fleet = SmallFleet()
    live(fleet, [fleet.site("MILL")])
    with pytest.raises(UnusableWhatIf, match="less than a week of usual use"):
        positions(fleet, what_if=WhatIf(replace_at=6.0))
    assert len(positions(fleet, what_if=WhatIf(replace_at=7.0)))
