"""Round ages, and how many parts were under observation at each: the line under every survival curve."""

from __future__ import annotations

import math
from collections.abc import Iterable
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from reliability.stats.lifetimes import Lifetimes

COLUMNS = 6


def round_ages(longest: float, most: int = COLUMNS) -> list[float]:
    """At most so many round ages from 0 to the longest."""
    if longest <= 0:
        return [0]
    step = longest / (most - 1)
    size = 10.0 ** math.floor(math.log10(step))
    nice = next(factor * size for factor in (1, 2, 2.5, 5, 10) if factor * size >= step * 0.999)
    return [nice * place for place in range(most) if nice * place <= longest]


def under_observation(lifetimes: Lifetimes, groups: Iterable[str]) -> dict[str, Any]:
    """Lives of each group with entry <= age < duration at a few round ages."""
    import numpy as np

    from reliability.stats.kaplan_meier import number_at_risk

    ages = round_ages(float(lifetimes.durations.max()))
    just_after = np.nextafter(np.array(ages), np.inf)
    counts = {
        group: [
            round(float(count)) for count in number_at_risk(lifetimes.subset(lifetimes.groups == group), just_after)
        ]
        for group in groups
    }
    return {"age": ages, "counts": counts}
