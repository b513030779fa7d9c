"""The renewal function against closed forms, a power series, simulation and its limits."""

from __future__ import annotations

import csv
from collections.abc import Callable
from math import exp, gamma, lgamma
from pathlib import Path

import numpy as np
import pytest
from scipy.special import gammainc

from reliability.stats.errors import InvalidArgument
from reliability.stats.renewal import renewal_function, renewals_of

CLOSED_FORMS = Path(__file__).parents[1] / "reference" / "renewal_closed_forms.csv"
CDFS: dict[str, Callable[[np.ndarray], np.ndarray]] = {
    "exponential": lambda age: -np.expm1(-age),
    "erlang2": lambda age: gammainc(2, age),
    "erlang3": lambda age: gammainc(3, age),
    "erlang4": lambda age: gammainc(4, age),
    "uniform": lambda age: np.minimum(age, 1.0),
}


def closed_forms() -> list[tuple[str, float, float]]:
    lines = [line for line in CLOSED_FORMS.read_text().splitlines() if not line.startswith("#")]
    return [(row["distribution"], float(row["time"]), float(row["renewals"])) for row in csv.DictReader(lines)]


@pytest.mark.parametrize(("name", "time", "expected"), closed_forms())
def test_closed_forms(name: str, time: float, expected: float) -> None:
    assert renewals_of(CDFS[name], np.array([time]))[0] == pytest.approx(expected, abs=1e-8)


def power_series(shape: float, time: float, terms: int = 45) -> float:
    """Smith & Leadbetter 1963: M(t) = sum (-1)^(k-1) A_k t^(k shape) / Gamma(1 + k shape), scale 1."""
    ratio = [exp(lgamma(1 + k * shape) - lgamma(1 + k)) for k in range(terms + 1)]
    coefficients = [0.0] * (terms + 1)
    for k in range(1, terms + 1):
        coefficients[k] = ratio[k] - sum(ratio[j] * coefficients[k - j] for j in range(1, k))
    return sum((-1) ** (k - 1) * coefficients[k] * time ** (k * shape) / gamma(1 + k * shape) for k in range(1, terms))


@pytest.mark.parametrize(
    ("shape", "tolerance"), [(0.6, 3e-5), (0.9, 1e-6), (1.0, 1e-8), (1.5, 1e-7), (2.0, 1e-8), (3.5, 1e-8)]
)
@pytest.mark.parametrize("time", [0.2, 0.7, 1.2])
def test_against_the_power_series_of_smith_and_leadbetter(shape: float, tolerance: float, time: float) -> None:
    found = renewal_function(shape, 10.0, [10.0 * time])[0]
    assert found == pytest.approx(power_series(shape, time), abs=tolerance)


def test_against_plain_simulation() -> None:
    rng = np.random.default_rng(7)
    ends = np.cumsum(rng.weibull(2.3, (200_000, 9)), axis=1)
    counts = (ends <= 2.5).sum(axis=1)
    error = counts.std() / np.sqrt(counts.size)
    assert abs(counts.mean() - renewal_function(2.3, 1.0, 2.5)) < 4 * error


def test_long_times_follow_the_limit_and_join_it_smoothly() -> None:
    mean, square = gamma(1.5), gamma(2.0)
    times = np.array([400.0, 499.0, 501.0, 5000.0]) * mean
    limit = times / mean + square / (2 * mean**2) - 1
    assert renewal_function(2.0, 1.0, times) == pytest.approx(limit, rel=1e-6)


def test_nothing_is_renewed_in_no_time_and_shapes_of_arrays_are_kept() -> None:
    assert renewal_function(2.0, 50.0, 0.0) == 0.0
    assert renewal_function(2.0, 50.0, [[10.0, 20.0], [30.0, 0.0]]).shape == (2, 2)


@pytest.mark.parametrize(
    ("shape", "scale", "times"), [(0, 1, 1), (1, -1, 1), (1, 1, -1), (1, 1, np.nan), (np.inf, 1, 1)]
)
def test_refuses_what_is_no_life_or_no_time(shape: float, scale: float, times: float) -> None:
    with pytest.raises(InvalidArgument):
        renewal_function(shape, scale, times)
