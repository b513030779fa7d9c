"""A season within the horizon: weeks follow their use, whatever grid the count runs on."""

from __future__ import annotations

import datetime as dt
from dataclasses import replace
from itertools import pairwise
from types import SimpleNamespace
from typing import Any

import numpy as np
import pytest
from scipy.stats import nbinom

from fleet.models import Component
from reliability.forecasts.count import count
from reliability.forecasts.duty import Duty
from reliability.forecasts.learned import Design
from reliability.forecasts.positions import positions_of
from reliability.forecasts.question import Question, question_of
from reliability.forecasts.season import _scaled, edges_of
from reliability.forecasts.standing import Standing
from reliability.forecasts.visiting import Visiting
from reliability.forecasts.what_if import WhatIf
from reliability.running_parts import RunningRow
from reliability.stats.count_results import CountDistribution
from reliability.stats.counts import forecast_counts
from reliability.stats.posterior import KnownWeibull

TODAY = dt.date(2026, 3, 4)
# log of the use a day in the first 28, 56, ... days over that of the ninety before: rising by half, then falling
CURVE = [0.15, 0.25, 0.33, 0.4, 0.42, 0.4, 0.35, 0.3, 0.25, 0.2, 0.15, 0.1, 0.05]
FALLING = [-0.1, -0.2, -0.32, -0.4, -0.45, -0.5, -0.5, -0.45, -0.4, -0.35, -0.3, -0.28, -0.27]


def asked(begin: int, days: int = 91) -> Question:
    component = Component(code="NUT", clock="strokes")
    return question_of(component, as_of=TODAY, begin=TODAY + dt.timedelta(days=begin), days=days)


def learned(curve: list[float], visits: dict[str, Visiting] | None = None) -> Any:
    """Lives without memory, so that failures follow the use: one in 50,000 strokes."""
    design = Design(KnownWeibull(1.0, 50_000.0), 50, 0.0, 0.0, 50_000.0)  # type: ignore[arg-type]
    return SimpleNamespace(
        design=lambda part: design,
        label=lambda part: "N1",
        designs={"N1": design},
        failures=50,
        taken_share=0.0,
        rules={},
        elsewhere=None,
        visits=visits or {},
        standing=Standing({}, 1.0, []),
        stop_share=0.0,
        duty=Duty(0.0, 0.0, curve),
        triggers=[],
    )


ROWS = [RunningRow(age=20_000.0, a_day=500.0, part="N1", needed="N1", site="LOCK", type="A", count=40)]
A_DAY = 40 * 500.0 / 50_000.0  # failures at the use of the past ninety days


def used(curve: list[float], begin: int, end: int) -> float:
    """Days of the past ninety days' use between two days."""
    duty = Duty(0.0, 0.0, curve)
    return end * duty.factor(end) - begin * duty.factor(begin)


@pytest.mark.parametrize("curve", [CURVE, FALLING, []])
@pytest.mark.parametrize(("begin", "days"), [(2, 91), (28, 91), (30, 91), (25, 90), (5, 40)])
def test_weeks_and_total_follow_the_use(curve: list[float], begin: int, days: int) -> None:
    question, taught = asked(begin, days), learned(curve)
    found = count(question, taught, positions_of(ROWS, question, taught))
    edges = [question.gap + start for start in (*range(0, days, 7), days)]
    wanted = [A_DAY * used(curve, *each) for each in pairwise(edges)]
    means = [week.failures.mean for week in found.by_window]
    assert means == pytest.approx(wanted, rel=0.01)
    assert sum(means) == pytest.approx(found.failures.mean, rel=0.003)
    assert found.failures.mean == pytest.approx(A_DAY * used(curve, question.gap, question.span), rel=0.003)
    assert found.by_group["LOCK"].failures.mean == pytest.approx(found.failures.mean)
    # chance alone: as many as the mean
    assert found.failures.standard_deviation**2 == pytest.approx(found.failures.mean, rel=0.03)


def test_count_and_simulation_agree_in_a_season() -> None:
    question, taught = asked(28), learned(CURVE)
    # half the designs change under way, which only a simulation counts
    changed = replace(question, what_if=WhatIf(superseding="N1", superseding_from=TODAY + dt.timedelta(days=60)))
    exact = count(question, taught, positions_of(ROWS, question, taught))
    played = count(changed, taught, positions_of(ROWS, changed, taught))
    assert played.failures.mean == pytest.approx(exact.failures.mean, rel=0.02)
    for own, other in zip(played.by_window, exact.by_window, strict=True):
        assert own.failures.mean == pytest.approx(other.failures.mean, rel=0.1)


def test_visits_stay_in_their_weeks() -> None:
    question = asked(0)
    taught = learned(CURVE, {"LOCK": Visiting(28.0, (TODAY + dt.timedelta(days=9)).isoformat())})
    rows = [row._replace(seen=19.0) for row in ROWS]
    means = [week.failures.mean for week in count(question, taught, positions_of(rows, question, taught)).by_window]
    assert [number for number, mean in enumerate(means) if mean > 0.01] == [1, 5, 9]


@pytest.mark.parametrize("share", [0.4, 0.9, 1.1, 1.7, 2.6])
def test_more_use_widens_what_is_not_known_in_proportion(share: float) -> None:
    """A Poisson count whose mean is gamma spread: times the share both mean and spread of its mean."""
    number = np.arange(400)
    mixed = CountDistribution(nbinom.pmf(number, 16.0, 16.0 / (16.0 + 40.0)))
    found = _scaled(mixed, share)
    assert found.mean == pytest.approx(40.0 * share, rel=1e-3)
    wanted = 40.0 * share + (40.0 * share) ** 2 / 16.0
    assert found.standard_deviation**2 == pytest.approx(wanted, rel=0.12)


def test_growing_failures_are_hardly_moved_by_the_season() -> None:
    """Young parts that age: told by the use of each week they are within five in a hundred of a count whose weeks are
    as long as their use.
    """
    question, taught = asked(28), learned(CURVE)
    design = Design(KnownWeibull(3.0, 60_000.0), 50, 0.0, 0.0, 60_000.0)  # type: ignore[arg-type]
    taught.design, taught.designs = lambda part: design, {"N1": design}
    rows = [row._replace(age=8_000.0) for row in ROWS]
    positions = positions_of(rows, question, taught)
    found = count(question, taught, positions)
    edges, _ = edges_of(question)
    used = [day * taught.duty.factor(day) for day in edges]
    slow = forecast_counts(
        design.life,
        positions.ages,
        positions.horizons,
        weights=positions.weights,
        windows=used,
        stretch=(1, len(used) - 1),
        cells=512,
        draws=1,
        rng=np.random.default_rng(1),
    )
    assert found.failures.mean == pytest.approx(slow.failures.mean, rel=0.05)
    weeks = [week.failures.mean for week in slow.by_window]
    assert [week.failures.mean for week in found.by_window] == pytest.approx(weeks, abs=0.8)
