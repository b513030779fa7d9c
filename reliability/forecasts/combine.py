"""Counts of several designs added up: their lives are learned apart, so their counts are independent."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import Any

from reliability.stats.counts import CountDistribution

PLAN_FOR = 0.95
MOST_MISSING = 1e-12


def add_up(distributions: Iterable[CountDistribution]) -> CountDistribution:
    """Distribution of the sum of independent counts."""
    import numpy as np
    from scipy.signal import convolve

    total = np.array([1.0])
    for each in distributions:
        total = np.clip(convolve(total, each.pmf), 0.0, None)
        total = total[: np.flatnonzero(total > MOST_MISSING)[-1] + 1]
    return CountDistribution(total / total.sum())


def told(distribution: CountDistribution, bands: Sequence[float], level: float = PLAN_FOR) -> dict[str, Any]:
    """Mean, bands and what to plan for, as in files.md; also at another level where one is asked for."""
    levels = dict.fromkeys([PLAN_FOR, level])
    return {
        "mean": float(distribution.mean),
        "median": int(distribution.quantile(0.5)),
        "bands": {f"{band:g}": list(distribution.interval(band)) for band in bands},
        "plan_for": {f"{each:g}": int(distribution.quantile(each)) for each in levels},
    }
