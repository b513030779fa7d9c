"""Simulated fleets as the distributions that the exact count gives."""

from __future__ import annotations

from itertools import pairwise
from typing import TYPE_CHECKING, Any

from reliability.forecasts.positions import Positions
from reliability.forecasts.question import Question

if TYPE_CHECKING:
    from reliability.stats.count_results import CountDistribution, CountForecast, Counts
    from reliability.stats.count_simulation import SimulatedCounts


def simulated_forecast(question: Question, found: SimulatedCounts, positions: Positions) -> CountForecast:
    """Shares of the simulated fleets with 0, 1, 2 ... failures, parts used and planned ones."""
    import numpy as np

    from reliability.forecasts.count import LABELS, edges_of, singles
    from reliability.stats.count_results import CountForecast

    single = singles(positions)
    windows, (first, last) = edges_of(question)
    everything = np.ones(len(single), dtype=bool)
    groups: list[dict[Any, Counts]] = []
    for name in LABELS:
        labels = np.array(single.column(name), dtype=object)
        groups.append({label: _counts(found, labels == label) for label in dict.fromkeys(labels.tolist())})
    total = _counts(found, everything)
    weeks = tuple(_only_failures(found.by_window[:, number]) for number in range(first, last))
    spans = tuple((float(begin), float(end)) for begin, end in pairwise(windows))
    return CountForecast(
        total.failures,
        total.parts_used,
        total.planned,
        by_group=groups[0],
        by_window=weeks,
        windows=spans[first:last],
        draws=len(found.failures),
        by_also=tuple(groups[1:]),
    )


def _counts(found: SimulatedCounts, which: Any) -> Counts:
    from reliability.stats.count_results import Counts

    return Counts(*(_distribution(each[:, which].sum(axis=1)) for each in found.by_position))


def _only_failures(counts: Any) -> Counts:
    from reliability.stats.count_results import Counts

    failures = _distribution(counts)
    return Counts(failures, failures, _distribution(counts * 0.0))


def _distribution(counts: Any) -> CountDistribution:
    import numpy as np

    from reliability.stats.count_results import CountDistribution

    return CountDistribution(np.bincount(np.rint(counts).astype(int)) / counts.size)
