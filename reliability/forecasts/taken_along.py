"""Parts taken along with another component's failure: one bowed screw, three sleeves."""

from __future__ import annotations

import datetime as dt
from collections import Counter, defaultdict
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from django.db.models import Q
from django.db.models.functions import Coalesce

from fleet.models import FAILURE_REASONS, Component, Fitting, RemovalReason, SiteKind
from reliability.running_parts import known_ended

if TYPE_CHECKING:
    from collections.abc import Sequence

FEWEST = 3  # removals with a cause on record, below which they count as removals by chance


@dataclass(frozen=True)
class Trigger:
    """Failures of another component that took this one's parts along: how many of them took 1, 2, ... and how many
    none.
    """

    component: str
    none: int
    taken: list[int]  # failures that took 1, 2, ... parts along

    @property
    def some(self) -> int:
        return sum(self.taken)

    @property
    def parts(self) -> int:
        return sum((number + 1) * count for number, count in enumerate(self.taken))

    def told(self) -> dict[str, Any]:
        return {"component": self.component, "none": self.none, "taken": self.taken}


def triggers(component: Component, as_of: dt.date, known_on: dt.date | None) -> list[Trigger]:
    """By the component that failed; which of its modes take parts along is in how many failures did."""
    taken = _ended(as_of, known_on).filter(
        part__component=component,
        reason=RemovalReason.TAKEN_WITH_ANOTHER,
        caused_by__isnull=False,
        caused_by__reason__in=FAILURE_REASONS,
    )
    if known_on is not None:  # the cause, too
        cause_known = Coalesce(
            "caused_by__removed_known_on", "caused_by__removed_visit__known_on", "caused_by__removed_on"
        )
        taken = taken.annotate(cause_known=cause_known).filter(cause_known__lte=known_on)
    by_cause: Counter[tuple[int, int]] = Counter(
        taken.exclude(caused_by__part__component=component).values_list("caused_by__part__component", "caused_by")
    )
    sizes: dict[int, Counter[int]] = defaultdict(Counter)
    for (cause, _), count in by_cause.items():
        sizes[cause][count] += 1
    found = []
    for cause, counts in sorted(sizes.items()):
        if sum(size * count for size, count in counts.items()) < FEWEST:
            continue
        failures = _ended(as_of, known_on).filter(part__component=cause, reason__in=FAILURE_REASONS).count()
        code = Component.objects.values_list("code", flat=True).get(pk=cause)
        some = sum(counts.values())
        found.append(Trigger(code, max(failures - some, 0), [counts[size] for size in range(1, max(counts) + 1)]))
    return found


def _ended(as_of: dt.date, known_on: dt.date | None) -> Any:
    ended = Fitting.objects.standing().filter(~Q(clock__site__kind=SiteKind.RIG), removed_on__lte=as_of)
    return known_ended(ended, known_on)


def parts_taken(trigger: Trigger, failures: Sequence[float], share: float = 1.0) -> Any:
    """Probabilities of 0, 1, ... parts taken along, given those of the other component's failures.

    How many failures take some along is beta-binomial (the chance is learned from the past ones); how many each takes
    is as often as it was, and one more. share: of the parts that are of the kind asked about.
    """
    import numpy as np

    from reliability.stats.count_compound import compound_counts, taken_along

    sizes = np.array([0.0, *trigger.taken]) + np.array([0.0, *(1.0 / len(trigger.taken) for _ in trigger.taken)])
    each = _thinned(sizes / sizes.sum(), share)
    return compound_counts(taken_along(failures, trigger.some, trigger.none), each)


def _thinned(pmf: Any, share: float) -> Any:
    """Each of M parts is of the kind asked about with this chance."""
    import numpy as np
    from scipy.stats import binom

    if share >= 1.0:
        return pmf
    number = np.arange(pmf.size)
    return pmf @ binom.pmf(number[None, :], number[:, None], share)
