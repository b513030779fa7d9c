"""A season within a horizon: weeks of much use bring more failures than weeks of little.

The count runs with the mean use a day of the whole horizon, the season's included; each week's figures are then told
in proportion to its own use, and the stretch asked for with them. Failures follow the use; that they also follow the
age, which is reached some days sooner or later, changes little within a quarter.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from itertools import pairwise
from typing import TYPE_CHECKING, Any

from reliability.forecasts.horizon import week_starts
from reliability.forecasts.question import Question

if TYPE_CHECKING:
    from reliability.forecasts.duty import Duty
    from reliability.stats.count_results import CountDistribution, CountForecast, Counts

UNCHANGED = 1e-6
LEAST = 0.02  # of the mean use is the least that a week has


@dataclass(frozen=True)
class Season:
    """days: edges of the weeks of the stretch asked for, from the start of the count; shares: each week's use a day
    over the mean use a day of the whole horizon.
    """

    days: list[int]
    shares: list[float]

    @property
    def whole(self) -> float:
        """Use a day of the stretch over that of the horizon."""
        lengths = [end - begin for begin, end in pairwise(self.days)]
        return sum(length * share for length, share in zip(lengths, self.shares, strict=True)) / sum(lengths)


def edges_of(question: Question) -> tuple[list[int], tuple[int, int]]:
    """Edges of what is counted, in days from the start of the count, and the stretch asked for among them."""
    starts = [question.gap + start for start in week_starts(question.days)]
    if question.gap == 0:
        return starts, (0, len(starts) - 1)
    return [0, *starts], (1, len(starts))


def season_of(question: Question, duty: Duty) -> Season:
    """Of the weeks asked for."""
    edges, (first, last) = edges_of(question)
    days = edges[first : last + 1]
    if not duty.season:
        return Season(days, [1.0] * (len(days) - 1))
    mean = duty.factor(question.span)
    used = [day * duty.factor(day) / mean for day in days]
    pairs = zip(pairwise(used), pairwise(days), strict=True)
    return Season(days, [max((after - before) / (end - begin), LEAST) for (before, after), (begin, end) in pairs])


def in_season(found: CountForecast, season: Season) -> CountForecast:
    """The same with the total by its use, and every week by its own, so that they add up to the total."""
    pairs = list(zip(found.by_window, season.shares, strict=True))
    before = sum(week.failures.mean for week, _ in pairs)
    after = sum(week.failures.mean * share for week, share in pairs)
    whole = season.whole
    together = whole * before / after if after > 0 else 1.0
    weeks = tuple(scaled_counts(week, share * together) for week, share in pairs)
    total = scaled_counts(found, whole)
    return replace(
        found,
        failures=total.failures,
        parts_used=total.parts_used,
        planned=total.planned,
        by_group={label: scaled_counts(each, whole) for label, each in found.by_group.items()},
        by_also=tuple(
            {label: scaled_counts(each, whole) for label, each in groups.items()} for groups in found.by_also
        ),
        by_window=weeks,
    )


def scaled_counts(counts: Counts, share: float) -> Counts:
    from reliability.stats.count_results import Counts

    return Counts(*(_scaled(each, share) for each in (counts.failures, counts.parts_used, counts.planned)))


def _scaled(counts: CountDistribution, share: float) -> CountDistribution:
    """The mean times `share`; what is chance grows like a Poisson count, what is not known in proportion.

    Fewer: each counts with this chance. More: some again with the chance of the excess, as far as the spread is beyond
    chance; the rest by chance alone.
    """
    import numpy as np
    from scipy.stats import poisson

    from reliability.stats.count_results import CountDistribution

    if abs(share - 1.0) < UNCHANGED or counts.pmf.size == 1:
        return counts
    if share > 2.0:
        return _scaled(_scaled(counts, 2.0), share / 2.0)
    if share < 1.0:
        return CountDistribution(_normal(counts.pmf @ _thinned(counts.pmf.size, share)))
    variance = counts.standard_deviation**2
    unknown = max(variance - counts.mean, 0.0) / variance if variance > 0 else 0.0
    again, number = _thinned(counts.pmf.size, (share - 1.0) * unknown), np.arange(counts.pmf.size)
    # all of them once, and some again
    pmf = np.bincount((number[:, None] + number).ravel(), (counts.pmf[:, None] * again).ravel())
    more = (share - 1.0) * (1.0 - unknown) * counts.mean
    chance: Any = poisson.pmf(np.arange(int(more + 9.0 * more**0.5) + 9), more)
    return CountDistribution(_normal(np.convolve(pmf, chance)))


def _thinned(size: int, chance: float) -> Any:
    """Probabilities of 0, 1, ... (columns) of as many as the line says, each with this chance."""
    import numpy as np
    from scipy.special import gammaln

    number = np.arange(size)
    if chance <= 0.0:
        return np.eye(1, size).repeat(size, axis=0)
    logs = gammaln(number + 1.0)
    rest = number[:, None] - number
    chosen = logs[:, None] - logs - logs[np.abs(rest)] + number * np.log(chance) + rest * np.log1p(-chance)
    return np.where(rest >= 0, np.exp(np.minimum(chosen, 0.0)), 0.0)


def _normal(pmf: Any) -> Any:
    """Without what is left of hardly any chance at the end."""
    used = pmf[: int((pmf > 1e-15).nonzero()[0].max()) + 1]
    return used / used.sum()
