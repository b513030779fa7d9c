"""A small run of the calibration benchmark: the machinery works, bands are of the right order, the rival is beaten."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from tests.benchmarks import bench_calibration
from tests.benchmarks.bench_calibration import lines, one, rows_of
from tests.benchmarks.calibration_cases import CASES, FURTHER
from tests.benchmarks.calibration_fleets import make_fleet


def test_a_young_fleet_is_held_and_the_constant_rate_beaten() -> None:
    case = replace(CASES["many, young"], sites=6, positions=8)
    rows = [one(case, np.random.default_rng([3, number]), weeks=False) for number in range(25)]
    pit, score, rival = np.array([row["all"] for row in rows]).T[:3]
    assert 0.56 <= np.mean((pit > 0.1) & (pit < 0.9)) <= 1.0
    assert rival.mean() > 2.0 * score.mean()
    assert len(list(lines("young", rows))) == 3


def test_visits_are_counted_on_their_lattice() -> None:
    """Interval-fitted life with instant replacement gave a PIT80 near 0; on the lattice the bands hold."""
    case = replace(CASES["visits every 28 days"], sites=5, positions=8)
    pit = np.array([one(case, np.random.default_rng([5, number]), weeks=False)["all"][0] for number in range(16)])
    assert np.mean((pit > 0.1) & (pit < 0.9)) >= 0.5


def test_a_run_goes_on_where_its_rows_end(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(bench_calibration.CASES, "small", replace(CASES["many, young"], sites=2, positions=4))
    begun = list(rows_of("small", 2, 1, tmp_path, weeks=True))
    whole = list(rows_of("small", 3, 1, tmp_path, weeks=True))
    assert whole[:2] == begun
    assert whole == list(rows_of("small", 3, 1, None, weeks=True))
    assert set(whole[0]) == {"all", "old site", "new site", "week 1", "week 7", "week 13"}


@pytest.mark.parametrize("name", [name for name, case in FURTHER.items() if case.family != "weibull" or case.sizes])
def test_lives_of_every_family_have_about_their_scale(name: str) -> None:
    """The generator's clocks: sizes as asked for, weeks that add up to the whole."""
    case = replace(FURTHER[name], keep=lambda failures: True)
    fleet = make_fleet(case, np.random.default_rng(2))
    assert fleet.by_week.sum() == fleet.outcomes["all"]
    assert fleet.ages.size == fleet.sites.size
    middle = np.median(fleet.records.durations[fleet.records.observed])
    assert 0.05 * case.scale < middle < 2.0 * case.scale  # type: ignore[operator]
