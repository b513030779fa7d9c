"""The Weibull line of a group for the charts: all its lives as one population, with its pointwise band."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from reliability.stats.lifetimes import Lifetimes
    from reliability.stats.weibull_fit import WeibullFit

POINTS = 48
LOWEST_SHARE = 0.002  # failed: where the line begins, or at the first failure if that is earlier
FARTHEST = 3.0  # the line is carried on to the median, but no further than this many times the oldest part


def fitted_line(fit: WeibullFit, lifetimes: Lifetimes, confidence: float) -> dict[str, Any]:
    """Survival of the fitted line and its likelihood-ratio band; beyond `seen_to` nobody has looked yet."""
    import numpy as np

    from reliability.stats.weibull_band import weibull_band

    seen_to = float(lifetimes.durations.max())
    first = float(lifetimes.durations[lifetimes.observed].min())
    start = max(min(first, fit.quantile(LOWEST_SHARE)), seen_to * 1e-4)
    end = max(seen_to, min(fit.median, FARTHEST * seen_to))
    ages = np.geomspace(start, end, POINTS)
    lower, upper = weibull_band(fit, ages, confidence)
    return {
        "age": [float(age) for age in ages],
        "survival": [float(value) for value in fit.survival(ages)],
        "lower": [float(value) for value in lower],
        "upper": [float(value) for value in upper],
        "seen_to": seen_to,
        "band": "likelihood-ratio, pointwise, lives independent",
    }
