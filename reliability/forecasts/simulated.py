"""Simulated fleets as the distributions that the exact count gives."""

from __future__ import annotations

from itertools import pairwise
from typing import TYPE_CHECKING, Any

from reliability.forecasts.positions import Positions
from reliability.forecasts.question import Question

if TYPE_CHECKING:
    from reliability.stats.count_results import CountDistribution, CountForecast, Counts
    from reliability.stats.count_simulation import SimulatedCounts


def simulated_forecast(
    question: Question, found: SimulatedCounts, positions: Positions, part: float = 1.0
) -> CountForecast:
    """Shares of the simulated fleets with 0, 1, 2 ... failures, parts used and planned ones.

    part: what share of all positions these are an even sample of.
    """
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
        groups.append({label: _counts(found, labels == label, part) for label in dict.fromkeys(labels.tolist())})
    groups[LABELS.index("needed")] = _by_needed(found, single, question.what_if.superseding, part)
    total = _counts(found, everything, part)
    weeks = tuple(_only_failures(found.by_window[:, number], part) for number in range(first, last))
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


def _counts(found: SimulatedCounts, which: Any, part: float) -> Counts:
    return _told([for_all(each[:, which], part) for each in found.by_position])


def _by_needed(found: SimulatedCounts, single: Positions, superseding: str | None, part: float) -> dict[Any, Counts]:
    """By the design that goes in: the superseding one from its day on."""
    import numpy as np

    labels = np.array(single.column("needed"), dtype=object)
    parts: dict[Any, list[Any]] = {}
    for label in dict.fromkeys(labels.tolist()):
        mine = labels == label
        pairs = zip(found.by_position, found.by_later, strict=True)
        parts[label] = [for_all((each - later)[:, mine], part) for each, later in pairs]
    if superseding is not None:
        after = [for_all(later, part) for later in found.by_later]
        before = parts.get(superseding, [0.0, 0.0, 0.0])
        parts[superseding] = [each + more for each, more in zip(before, after, strict=True)]
    return {label: _told(each) for label, each in parts.items()}


def _told(samples: list[Any]) -> Counts:
    from reliability.stats.count_results import Counts

    return Counts(*(_distribution(each) for each in samples))


def _only_failures(sums: Any, part: float) -> Counts:
    from reliability.stats.count_results import Counts

    # in one week hardly a position fails twice: their number is chance as a Poisson count's
    counts = _grown(sums, float(sums.mean()), part)
    failures = _distribution(counts)
    return Counts(failures, failures, _distribution(counts * 0.0))


def _distribution(counts: Any) -> CountDistribution:
    import numpy as np

    from reliability.stats.count_results import CountDistribution

    return CountDistribution(np.bincount(np.maximum(np.rint(counts), 0).astype(int)) / counts.size)


def for_all(sample: Any, share: float) -> Any:
    """Sums (draws,) over all positions from those of an even sample of them, (draws, positions).

    The mean grows by 1 / share; so does the spread of what is not known, but the spread by chance only by its root.
    Neighbours tell the spread by chance, for they are alike in site, part and age: half the mean square of their
    difference (Cochran 1977, Sampling Techniques, 3rd ed., ch. 8).
    """
    import numpy as np

    sums = sample.sum(axis=1)
    if share >= 1.0 or sample.shape[1] < 2:
        return sums / share
    return _grown(sums, 0.5 * float((np.diff(sample, axis=1) ** 2).mean()) * sample.shape[1], share)


def _grown(sums: Any, chance: float, share: float) -> Any:
    """chance: the variance that the sample's sums have by chance."""
    import numpy as np

    if share >= 1.0:
        return sums
    spread, centre = float(sums.var()), sums.mean()
    wanted = max(spread - chance, 0.0) / share**2 + chance / share
    return centre / share + (sums - centre) * np.sqrt(wanted / max(spread, 1e-12))
