"""The mixtures of a forecast being collected: which sums of positions are asked for, of which stretches and kinds."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from reliability.stats.count_positions import Rows
from reliability.stats.count_results import CountDistribution, CountForecast, Counts
from reliability.stats.count_sums import CountMixtures

FloatArray = NDArray[np.float64]


@dataclass(frozen=True)
class Plan:
    """What is asked of a count.

    grouped: the target that the groups speak of (0 all that is counted, then its windows); groupings: how many,
    where labels of positions are tuples; windows: what the windows are called; parts_by_window: whether parts used are
    counted in each window too.
    """

    grouped: int
    groupings: int
    windows: tuple[tuple[float, float], ...]
    parts_by_window: bool


class Tallies:
    """For each kind all that is counted, and each window's, one of them by group as well."""

    def __init__(self, rows: Rows, targets: int, plan: Plan) -> None:
        self._share = 1.0
        self._plan = plan
        self._targets = targets
        classes = rows.classes
        planned = bool(np.isfinite(classes.replace_at).any())
        differ = planned or bool(classes.other_removals.any()) or bool(rows.extra.any())
        self.kinds = ["failures", *(["parts"] if differ else []), *(["planned"] if planned else [])]
        self._lines, self._sums = _lines_of(rows, plan.groupings)
        self._mixtures = {
            kind: [CountMixtures(len(self._sums) if n == plan.grouped else 1) for n in range(self.targets(kind))]
            for kind in self.kinds
        }

    def targets(self, kind: str) -> int:
        """How many of the targets this kind is counted in."""
        return self._targets if kind == "failures" or self._plan.parts_by_window else self._plan.grouped + 1

    def add(self, kind: str, number: int, tails: FloatArray, weights: FloatArray) -> None:
        """Tails of target `number` for some draws; weights (groups + 1, rows)."""
        own = self._sums @ weights if number == self._plan.grouped else weights[-1:]
        self._mixtures[kind][number].add(tails, own, share=self._share)

    def each_for(self, share: float) -> Tallies:
        """These tallies, where each draw added from now on stands for `share` draws."""
        self._share = share
        return self

    def add_nothing(self, draws: int) -> None:
        """No positions at all: nothing will fail."""
        for mixtures in self._mixtures.values():
            for mixture in mixtures:
                mixture.add(np.zeros((draws, 0, 1)), np.zeros((1, 0)), share=self._share)

    def forecast(self, rows: Rows, draws: int) -> CountForecast:
        """The finished distributions."""
        found = {kind: [mixture.pmfs() for mixture in mixtures] for kind, mixtures in self._mixtures.items()}
        total = _counts({kind: pmfs[0][-1] for kind, pmfs in found.items()})
        by_window = [
            _counts({kind: pmfs[1 + n][-1] for kind, pmfs in found.items() if 1 + n < len(pmfs)})
            for n in range(len(self._plan.windows))
        ]
        groups: list[dict[Any, Counts]] = [{} for _ in range(self._plan.groupings)]
        if rows.group_labels != [None]:
            for grouping, label, line in self._lines:
                pmfs = {kind: pmfs[self._plan.grouped][line] for kind, pmfs in found.items()}
                groups[grouping][label] = _counts(pmfs)
        return CountForecast(
            total.failures,
            total.parts_used,
            total.planned,
            by_group=groups[0],
            by_also=tuple(groups[1:]),
            by_window=tuple(by_window),
            windows=self._plan.windows,
            draws=draws,
        )


def _lines_of(rows: Rows, groupings: int) -> tuple[list[tuple[int, Any, int]], FloatArray]:
    """(grouping, label, line) of each label, and the lines as sums of the groups; the total stands last."""
    labels = rows.group_labels
    names: list[tuple[int, Any, int]] = []
    sums: list[FloatArray] = []
    for grouping in range(groupings):
        own = labels if groupings == 1 else [label[grouping] for label in labels]
        distinct = list(dict.fromkeys(own))
        for label in distinct:
            # one group alone is the total
            names.append((grouping, label, len(sums) if len(distinct) > 1 else -1))
            if len(distinct) > 1:
                sums.append(np.array([*(each == label for each in own), False], dtype=np.float64))
    sums.append(np.array([0.0] * len(labels) + [1.0]))
    return names, np.array(sums)


def _counts(found: dict[str, FloatArray]) -> Counts:
    counts = {kind: CountDistribution(pmf) for kind, pmf in found.items()}
    none = CountDistribution(np.array([1.0]))
    return Counts(counts["failures"], counts.get("parts", counts["failures"]), counts.get("planned", none))
