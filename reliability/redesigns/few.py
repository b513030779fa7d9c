"""What few or no failures of a new part still say: a bound on its rate, lower bounds of its life, and a longer test."""

from __future__ import annotations

from typing import Any

from scipy.special import gammaincinv

from reliability.life_answer import finite
from reliability.redesigns.compared import AFTER, Compared
from reliability.stats.errors import StatisticsError
from reliability.stats.few_failures import known_shape_bounds, success_run_size
from reliability.stats.lifetimes import Lifetimes

FEW = 5
DAYS_A_YEAR = 365.25
SHAPES = (1.0, 1.5, 2.0, 3.0, 5.0)
ALLOWED = (0, 1, 2, 3)
LENGTHS = (0.5, 1.0, 1.5, 2.0)  # of a test, in lives to be shown


def few_failures_of(
    lives: Compared, confidence: float, target: float | None, shape: float | None
) -> dict[str, Any] | None:
    """None where the new part has failed often enough for curves to speak.

    target: the B10 life to be shown, on the clock; shape: of the old parts, the first among those assumed.
    """
    new = lives.side(AFTER)
    if new is None or new.failures >= FEW:
        return None
    # days at a depot or standing still are no days in service
    days = new.exposure if lives.clock == "days" else (lives.ended - lives.begun)[lives.is_new].clip(min=0.0).sum()
    years = float(days) / DAYS_A_YEAR
    return {
        "parts": int(new.count),
        "failures": int(new.failures),
        "exposure": finite(new.exposure),
        "part_years": finite(years),
        "confidence": confidence,
        "years_a_failure": finite(years_a_failure(int(new.failures), years, confidence)),
        "bounds": _bounds(new, confidence, shape),
        "target": finite(target),
        "plans": _plans(confidence, target, shape or 2.0),
        "plan_shape": finite(shape or 2.0),
    }


def years_a_failure(failures: int, years: float, confidence: float) -> float:
    """Part-years a failure that are exceeded with the confidence, for failures that come at a constant rate.

    2 T / chi2(confidence; 2 r + 2): NIST/SEMATECH e-Handbook of Statistical Methods, 8.4.5.1.
    """
    return years / float(gammaincinv(failures + 1.0, confidence))


def _bounds(new: Lifetimes, confidence: float, shape: float | None) -> list[dict[str, Any]]:
    shapes = dict.fromkeys([*([round(shape, 2)] if shape else []), *SHAPES])
    try:
        found = known_shape_bounds(new, tuple(shapes), probability=0.1, confidence_level=confidence)
    except StatisticsError:
        return []
    return [{"shape": each.shape, "b10_lower": finite(each.quantile_lower)} for each in found]


def _plans(confidence: float, target: float | None, shape: float) -> list[dict[str, Any]]:
    """Parts to test to show the B10 life, by length of the test and failures allowed."""
    if not target:
        return []
    return [
        {
            "age": finite(target * length),
            "allowed": allowed,
            "parts": success_run_size(0.9, confidence, failures=allowed, life_ratio=length, shape=shape),
        }
        for length in LENGTHS
        for allowed in ALLOWED
    ]
