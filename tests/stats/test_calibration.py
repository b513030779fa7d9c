"""A small run of the calibration benchmark: the machinery works, bands are of the right order, the rival is beaten."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from tests.benchmarks.bench_calibration import CASES, lines, score


def test_a_young_fleet_is_held_and_the_constant_rate_beaten() -> None:
    case = replace(CASES["many, young"], sites=6, positions=8)
    scores = score(case, 25, seed=3)
    pit = np.array(scores.pit["all"])
    assert 0.56 <= np.mean((pit > 0.1) & (pit < 0.9)) <= 1.0
    assert np.mean(scores.rival["all"]) > 2.0 * np.mean(scores.crps["all"])
    assert len(list(lines("young", scores))) == 3


def test_visits_are_counted_on_their_lattice() -> None:
    """Interval-fitted life with instant replacement gave a PIT80 near 0; on the lattice the bands hold."""
    case = replace(CASES["visits every 28 days"], sites=5, positions=8)
    pit = np.array(score(case, 16, seed=5).pit["all"])
    assert np.mean((pit > 0.1) & (pit < 0.9)) >= 0.5
