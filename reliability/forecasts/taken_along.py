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
    from collections.abc import Mapping, Sequence

FEWEST = 3  # removals with a cause on record, below which they count as removals by chance


@dataclass(frozen=True)
class Trigger:
    """Failures of another component that took this one's parts along, by mode.

    modes: of each mode, how many of its failures took none along, 1, 2, ...; designs: failures of each design, in the
    order of the modes. A failure without a mode stands under "".
    """

    component: str
    modes: dict[str, list[int]]
    designs: dict[str, list[int]]

    @property
    def none(self) -> int:
        return sum(counts[0] for counts in self.modes.values())

    @property
    def taken(self) -> list[int]:
        """Failures that took 1, 2, ... parts along, whatever their mode."""
        found = [sum(column) for column in zip(*self.modes.values(), strict=True)][1:]
        while found and not found[-1]:
            found.pop()
        return found

    @property
    def parts(self) -> int:
        return sum((number + 1) * count for number, count in enumerate(self.taken))

    def told(self) -> dict[str, Any]:
        return {"component": self.component, "modes": self.modes, "designs": self.designs}


def triggers(component: Component, as_of: dt.date, known_on: dt.date | None) -> list[Trigger]:
    """By the component that failed: which of its modes take parts along, and by what its designs fail."""
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
    by_cause: dict[int, Counter[int]] = defaultdict(Counter)
    for cause, fitting in taken.exclude(caused_by__part__component=component).values_list(
        "caused_by__part__component", "caused_by"
    ):
        by_cause[cause][fitting] += 1
    codes = dict(Component.objects.filter(pk__in=by_cause).values_list("pk", "code"))
    found = [
        _trigger(codes[cause], counts, _ended(as_of, known_on).filter(part__component=cause))
        for cause, counts in sorted(by_cause.items())
        if sum(counts.values()) >= FEWEST
    ]
    return [trigger for trigger in found if trigger.parts]


def _trigger(code: str, counts: Counter[int], ended: Any) -> Trigger:
    """counts: parts taken along by each failure; ended: the component's fittings that ended."""
    failed = ended.filter(reason__in=FAILURE_REASONS).order_by("pk").values_list("pk", "mode__code", "part__code")
    most = max(counts.values())
    modes: dict[str, list[int]] = {}
    designs: dict[str, Counter[str]] = defaultdict(Counter)
    for fitting, mode, part in failed:
        name = mode or ""
        # a failure may have taken more along than became known by then, but not fewer
        modes.setdefault(name, [0] * (most + 1))[counts[fitting]] += 1
        designs[part][name] += 1
    return Trigger(
        code,
        {name: modes[name] for name in sorted(modes)},
        {part: [designs[part][name] for name in sorted(modes)] for part in sorted(designs)},
    )


def _ended(as_of: dt.date, known_on: dt.date | None) -> Any:
    ended = Fitting.objects.standing().filter(~Q(clock__site__kind=SiteKind.RIG), removed_on__lte=as_of)
    return known_ended(ended, known_on)


def parts_taken(
    trigger: Trigger, failures: Sequence[float], share: float = 1.0, *, coming: Mapping[str, float] | None = None
) -> Any:
    """Probabilities of 0, 1, ... parts taken along, given those of the other component's failures.

    coming: failures expected of each of its designs, which decide by what it will fail. How many failures take some
    along is beta-binomial, for the chance of each mode and the mix of modes are learned from past ones; how many each
    takes is as often as it was, and one more. share: of the parts that are of the kind asked about.
    """
    import numpy as np

    from reliability.stats.count_compound import compound_counts, taken_along
    from reliability.stats.taken_rates import chances_by_mode, mixed_modes

    counts = np.array(list(trigger.modes.values()), dtype=np.float64)
    chances = chances_by_mode(counts[:, 1:].sum(axis=1), counts[:, 0])
    designs = dict(trigger.designs)
    expected = dict.fromkeys(designs, 1.0) if coming is None else dict(coming)
    nothing = [0] * len(trigger.modes)
    mix, known = mixed_modes([designs.get(name, nothing) for name in expected], list(expected.values()))
    some, none = chances.of_mix(mix, known)
    sizes = _sizes(counts[:, 1:], mix * chances.mean)
    each = _thinned(np.array([0.0, *sizes]), share)
    return compound_counts(taken_along(failures, some, none, prior=0.0), each)


def _sizes(taken: Any, weights: Any) -> Any:
    """Shares of failures that take 1, 2, ... along among those that take any: each mode's own, leaning on all of them
    with the weight of one failure.
    """
    everywhere = taken.sum(axis=0) + 1.0 / taken.shape[1]
    everywhere = everywhere / everywhere.sum()
    own = (taken + everywhere) / (taken.sum(axis=1, keepdims=True) + 1.0)
    return weights @ own / weights.sum()


def _thinned(pmf: Any, share: float) -> Any:
    """Each of M parts is of the kind asked about with this chance."""
    import numpy as np
    from scipy.stats import binom

    if share >= 1.0:
        return pmf
    number = np.arange(pmf.size)
    return pmf @ binom.pmf(number[None, :], number[:, None], share)
