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
    """For each kind all that is counted and one target by group, from every draw; each window from some of them."""

    def __init__(self, rows: Rows, plan: Plan) -> None:
        self._plan = plan
        classes = rows.classes
        planned = bool(np.isfinite(classes.replace_at).any())
        differ = planned or bool(classes.other_removals.any()) or bool(rows.extra.any())
        self.kinds = ["failures", *(["parts"] if differ else []), *(["planned"] if planned else [])]
        self.window_kinds = self.kinds if plan.parts_by_window else self.kinds[:1]
        self._lines, self._sums = _lines_of(rows, plan.groupings)
        apart = plan.grouped > 0
        self._whole = {kind: CountMixtures(1 if apart else len(self._sums)) for kind in self.kinds}
        self._grouped = {kind: CountMixtures(len(self._sums)) for kind in self.kinds} if apart else self._whole
        self._windows = {kind: CountMixtures(1, len(plan.windows)) for kind in self.window_kinds}

    def add(self, kind: str, targets: list[FloatArray], weights: FloatArray, share: float) -> None:
        """Tails (draws, rows, orders) of all that is counted, and of the target by group where that is another.

        weights (groups + 1, rows); each draw stands for `share` draws.
        """
        if targets[1:]:
            self._whole[kind].add(targets[0], weights[-1:], share)
        self._grouped[kind].add(targets[-1], self._sums @ weights, share)

    def add_windows(self, kind: str, targets: list[FloatArray], weights: FloatArray, shares: FloatArray) -> None:
        """Tails of each window, for draws that stand for `shares` draws (draws,)."""
        orders = max(tails.shape[2] for tails in targets)
        tails = np.zeros((len(targets), *targets[0].shape[:2], orders))
        for place, found in zip(tails, targets, strict=True):
            place[..., : found.shape[2]] = found
        self._windows[kind].add(tails.reshape(-1, *tails.shape[2:]), weights[-1:], shares)

    def add_nothing(self, draws: int) -> None:
        """No positions at all: nothing will fail."""
        for mixtures in (self._whole, self._grouped, self._windows):
            for mixture in mixtures.values():
                mixture.add(np.zeros((draws * mixture.targets, 0, 1)), np.zeros((1, 0)))

    def forecast(self, rows: Rows, draws: int) -> CountForecast:
        """The finished distributions."""
        total = _counts({kind: mixture.pmfs()[-1] for kind, mixture in self._whole.items()})
        by_window = [
            _counts({kind: mixture.pmfs(number)[0] for kind, mixture in self._windows.items()})
            for number in range(len(self._plan.windows))
        ]
        groups: list[dict[Any, Counts]] = [{} for _ in range(self._plan.groupings)]
        if rows.group_labels != [None]:
            found = {kind: mixture.pmfs() for kind, mixture in self._grouped.items()}
            for grouping, label, line in self._lines:
                groups[grouping][label] = _counts({kind: pmfs[line] for kind, pmfs in found.items()})
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
