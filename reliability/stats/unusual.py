"""Is a count unusual under its forecast, and may that be said of one among many?"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from reliability.stats.count_results import CountDistribution
from reliability.stats.errors import InvalidArgument


@dataclass(frozen=True)
class Tails:
    """P(N >= count) and P(N <= count) under the forecast, and the two-sided chance: twice the smaller, at most 1."""

    at_least: float
    at_most: float
    two_sided: float

    @property
    def high(self) -> bool:
        """Whether the count lies on the high side."""
        return self.at_least < self.at_most


def tails(forecast: CountDistribution, count: int) -> Tails:
    """Predictive probabilities of a count as far out as this one (a whole number of at least 0).

    Twice the smaller tail is conservative for counts: a right forecast gives a value of p or less with probability
    at most p. Source: Cox & Hinkley 1974, Theoretical Statistics, section 3.4; predictive use: Box 1980, J. R.
    Statist. Soc. A 143, 383.
    """
    if count < 0 or count != int(count):
        raise InvalidArgument(f"count is {count}; it must be a whole number of at least 0.")
    at_least = min(1.0, forecast.chance_at_least(count))
    at_most = min(1.0, max(0.0, 1.0 - forecast.chance_above(count)))
    return Tails(at_least, at_most, min(1.0, 2.0 * min(at_least, at_most)))


def unusual_among(chances: ArrayLike, level: float) -> NDArray[np.bool_]:
    """Which of several two-sided chances, shape (n,), may be called unusual: Holm's step-down rule.

    The chance that anything is called so while every forecast is right is at most `level`, whatever the comparisons
    have in common. Source: Holm 1979, Scand. J. Statist. 6, 65.
    """
    row = np.asarray(chances, dtype=np.float64)
    if row.ndim != 1 or not ((row >= 0) & (row <= 1)).all() or not 0 < level < 1:
        raise InvalidArgument("chances must be a row of probabilities and level lie between 0 and 1.")
    order = np.argsort(row, kind="stable")
    within = row[order] <= level / np.arange(row.size, 0, -1)
    stop = int(np.argmin(within)) if not within.all() else row.size
    called = np.zeros(row.size, dtype=bool)
    called[order[:stop]] = True
    return called
