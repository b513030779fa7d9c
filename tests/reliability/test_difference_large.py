"""Differences of large fleets from a sample of positions, beside those of all positions."""

from __future__ import annotations

import datetime as dt
import time
from dataclasses import replace
from types import SimpleNamespace
from typing import Any

import numpy as np
import pytest

from reliability.forecasts import count as counting
from reliability.forecasts import difference
from reliability.forecasts.count import count
from reliability.forecasts.learned import Design
from reliability.forecasts.positions import positions_of
from reliability.forecasts.simulated import for_all
from reliability.forecasts.what_if import WhatIf
from reliability.running_parts import RunningRow
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.posterior import weibull_posterior
from tests.reliability.test_season import TODAY, asked, learned

WORN_EARLY = np.concatenate([np.linspace(8_000, 60_000, 30), np.linspace(5_000, 45_000, 50)])


def taught() -> Any:
    """Thirty failures: a good deal of what comes is not known."""
    posterior = weibull_posterior(Lifetimes(WORN_EARLY, np.arange(80) < 30))
    found = learned([0.2] * 13)
    design = Design(posterior, 30, 0.0, 0.0, 50_000.0)  # type: ignore[arg-type]
    found.design, found.designs, found.failures = lambda part: design, {"N1": design, "N2": design}, 30
    found.label = lambda part: part
    return found


def rows(each: int) -> list[RunningRow]:
    """Eight sites, fifteen ages."""
    return [
        RunningRow(2_500.0 * age, 500.0, "N1", "N1", f"S{site}", "A", each) for site in range(8) for age in range(15)
    ]


def differences(assumed: WhatIf, each: int) -> dict[str, Any]:
    question = replace(asked(0), what_if=assumed)
    running: Any = SimpleNamespace(rows=rows(each))
    return difference._differences(question, running, taught(), (0.5, 0.8, 0.95))


CASES = [
    WhatIf(duty=1.3),
    WhatIf(replace_at=30_000.0),
    WhatIf(superseding="N2", superseding_from=TODAY, retrofit_a_week=60.0),
]


@pytest.mark.parametrize("assumed", CASES, ids=["duty", "planned", "retrofits"])
def test_a_sample_tells_the_same_difference(assumed: WhatIf, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(difference, "SIMULATED", 400_000)
    monkeypatch.setattr(difference, "SAMPLE", 10_000)
    whole = differences(assumed, 25)
    monkeypatch.setattr(difference, "SAMPLE", 1000)
    sample = differences(assumed, 25)
    for kind in ("failures", "parts_used", "planned"):
        wanted, found = whole[kind], sample[kind]
        (low, high), (lower, upper) = wanted["bands"]["0.8"], found["bands"]["0.8"]
        assert found["mean"] == pytest.approx(wanted["mean"], abs=0.25 * (high - low) + 1)
        # a part that is changed stands for three
        assert upper - lower == pytest.approx(high - low, rel=0.25, abs=20 if kind == "planned" else 4)


def test_a_hundred_thousand_positions_are_told_in_seconds() -> None:
    begun = time.process_time()
    found = differences(CASES[2], 850)
    assert time.process_time() - begun < 8.0
    # sixty a week, of which each simulated one stands for sixty
    assert found["planned"]["mean"] == pytest.approx(720, abs=1)
    assert found["parts_used"]["mean"] > 200
    assert found["failures"]["mean"] < 0


def test_what_needs_a_simulation_is_counted_for_a_large_fleet_too(monkeypatch: pytest.MonkeyPatch) -> None:
    """A new design from the middle of the quarter on: the sample's count beside that of all."""
    changed = WhatIf(superseding="N2", superseding_from=TODAY + dt.timedelta(days=40), retrofit_a_week=30.0)
    question, known = replace(asked(0), what_if=changed), taught()
    positions = positions_of(rows(12), question, known)
    whole = count(question, known, positions)
    monkeypatch.setattr(counting, "MOST_POSITIONS", 1000)
    monkeypatch.setattr(counting, "SAMPLE_OF_MANY", 600)
    sample = count(question, known, positions)
    assert sample.failures.mean == pytest.approx(whole.failures.mean, rel=0.03)
    assert sample.failures.standard_deviation == pytest.approx(whole.failures.standard_deviation, rel=0.15)
    for own, other in (
        (sample.by_group["S3"], whole.by_group["S3"]),
        (sample.by_also[2]["N2"], whole.by_also[2]["N2"]),
    ):
        assert own.parts_used.mean == pytest.approx(other.parts_used.mean, rel=0.08)
        assert own.parts_used.standard_deviation == pytest.approx(other.parts_used.standard_deviation, rel=0.25)
    weeks = zip(sample.by_window, whole.by_window, strict=True)
    assert all(own.failures.mean == pytest.approx(other.failures.mean, rel=0.1) for own, other in weeks)


def test_the_spread_by_chance_of_a_sample_grows_by_its_root() -> None:
    """Nothing but chance, and nothing but what is not known."""
    rng = np.random.default_rng(4)
    assert for_all(rng.poisson(0.5, (2000, 400)).astype(float), 0.1).std() == pytest.approx((2000.0) ** 0.5, rel=0.1)
    same = np.repeat(rng.normal(1.0, 0.2, (2000, 1)), 400, axis=1)
    assert for_all(same, 0.1).std() == pytest.approx(4000 * 0.2, rel=0.05)
    assert for_all(same, 1.0) == pytest.approx(same.sum(axis=1))
