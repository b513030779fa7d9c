"""What a count forecast answers with: distributions of counts, in total, by group and by window."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from reliability.stats.errors import InvalidArgument

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class CountDistribution:
    """Probabilities `pmf` of the counts 0, 1, 2 ..., shape (n,)."""

    pmf: FloatArray

    @cached_property
    def mean(self) -> float:
        """Expected count."""
        return float(self.pmf @ np.arange(self.pmf.size))

    @cached_property
    def standard_deviation(self) -> float:
        """Standard deviation of the count."""
        return float(np.sqrt(self.pmf @ (np.arange(self.pmf.size) - self.mean) ** 2))

    @cached_property
    def _cumulative(self) -> FloatArray:
        return np.cumsum(self.pmf)

    def quantile(self, p: float) -> int:
        """Smallest count k with P(N <= k) >= p; the quantity that is enough in the share p of cases."""
        if not 0 <= p <= 1:
            raise InvalidArgument(f"p is {p:g}; it must lie between 0 and 1.")
        return min(int(np.searchsorted(self._cumulative, p - 1e-12)), self.pmf.size - 1)

    def interval(self, level: float) -> tuple[int, int]:
        """Equal-tailed band holding at least `level`."""
        if not 0 < level < 1:
            raise InvalidArgument(f"level is {level:g}; it must lie between 0 and 1.")
        return self.quantile((1.0 - level) / 2.0), self.quantile((1.0 + level) / 2.0)

    def chance_above(self, count: float) -> float:
        """P(N > count)."""
        return float(self.pmf[int(np.floor(count)) + 1 :].sum()) if count >= 0 else 1.0

    def chance_at_least(self, count: float) -> float:
        """P(N >= count)."""
        return self.chance_above(np.ceil(count) - 1)


@dataclass(frozen=True)
class Counts:
    """Failures, parts used (failures, other removals, planned ones, stopped modules put right) and planned ones
    alone.
    """

    failures: CountDistribution
    parts_used: CountDistribution
    planned: CountDistribution


@dataclass(frozen=True)
class CountForecast(Counts):
    """Totals, each group's (and each further label's), and each window's (edges as given) counts."""

    by_group: dict[Any, Counts]
    by_window: tuple[Counts, ...]
    windows: tuple[tuple[float, float], ...]
    draws: int
    by_also: tuple[dict[Any, Counts], ...] = ()
