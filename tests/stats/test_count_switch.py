"""A superseding design from the very start takes a short way through the count: it must come to the same."""

from __future__ import annotations

import numpy as np
import pytest

from reliability.stats.counts import forecast_counts
from reliability.stats.posterior import KnownWeibull


def counts(switch_at: float) -> list[float]:
    found = forecast_counts(
        KnownWeibull(2.0, 100.0),
        np.linspace(0.0, 90.0, 30),
        126.0,
        windows=[0, 35, 126],
        next_posterior=KnownWeibull(2.5, 60.0),
        switch_at=switch_at,
        other_removals=0.002,
        draws=2,
        rng=np.random.default_rng(1),
    )
    windows = [each for window in found.by_window for each in (window.failures.mean, window.parts_used.mean)]
    return [found.failures.mean, found.failures.standard_deviation, *windows]


def test_a_switch_at_once_is_the_limit_of_a_switch_soon() -> None:
    assert counts(0.0) == pytest.approx(counts(1e-9), rel=5e-4)


def test_it_differs_from_no_switch_at_all() -> None:
    assert counts(0.0)[0] > 1.1 * counts(1e9)[0]
