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

    from reliability.forecasts.count import LABELS, singles
    from reliability.forecasts.season import edges_of
    from reliability.stats.count_results import CountForecast

    single = singles(positions)
    windows, (first, last) = edges_of(question)
    everything = np.ones(len(single), dtype=bool)
    groups: list[dict[Any, Counts]] = []
    for name in LABELS:
        labels = np.array(single.column(name), dtype=object)
        groups.append({label: _counts(found, labels == label) for label in dict.fromkeys(labels.tolist())})
    groups[LABELS.index("needed")] = _by_needed(found, single, question.what_if.superseding)
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
    return _told([each[:, which].sum(axis=1) for each in found.by_position])


def _by_needed(found: SimulatedCounts, single: Positions, superseding: str | None) -> dict[Any, Counts]:
    """By the design that goes in: the superseding one from its day on."""
    import numpy as np

    labels = np.array(single.column("needed"), dtype=object)
    parts: dict[Any, list[Any]] = {}
    for label in dict.fromkeys(labels.tolist()):
        mine = labels == label
        pairs = zip(found.by_position, found.by_later, strict=True)
        parts[label] = [(each - later)[:, mine].sum(axis=1) for each, later in pairs]
    if superseding is not None:
        after = [later.sum(axis=1) for later in found.by_later]
        before = parts.get(superseding, [0.0, 0.0, 0.0])
        parts[superseding] = [each + more for each, more in zip(before, after, strict=True)]
    return {label: _told(each) for label, each in parts.items()}


def _told(samples: list[Any]) -> Counts:
    from reliability.stats.count_results import Counts

    return Counts(*(_distribution(each) for each in samples))


def _only_failures(counts: Any) -> Counts:
    from reliability.stats.count_results import Counts

    failures = _distribution(counts)
    return Counts(failures, failures, _distribution(counts * 0.0))


def _distribution(counts: Any) -> CountDistribution:
    import numpy as np

    from reliability.stats.count_results import CountDistribution

    return CountDistribution(np.bincount(np.rint(counts).astype(int)) / counts.size)
