"""What the records say about the lives of one component: rows, what was left out and what to be warned of."""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field
from functools import cached_property
from typing import TYPE_CHECKING, Any, NamedTuple

if TYPE_CHECKING:
    from reliability.stats.lifetimes import Lifetimes

NO_PLACE = "no place"
NOT_NAMED = "not named"


class LifeRow(NamedTuple):
    """Equal lives, or equal fittings left out for one reason; site and group in the database's own numbers."""

    left_out: str | None
    state: str  # failed, other mode, worn, not known, withdrawn, running
    entry: float | None
    duration: float | None
    last_good: float | None
    site: Any
    group: Any
    count: int
    not_measured: int = 0
    also: Any = None  # a second label: mode, module or lot


@dataclass(frozen=True)
class LeftOut:
    """Fittings that are in no estimate, and why; `query` lists them."""

    reason: str
    count: int
    query: Any = None


@dataclass(frozen=True, eq=False)
class FleetLives:
    """Life data of one component on one clock.

    lifetimes: the rows, grouped, with `.groups` and `.sites` as codes; None where no life is left
    states: for each row failed, other mode, worn, not known, withdrawn or running
    if_not_known_failed: the same lives with every removal of unknown reason counted as a failure, where they are many
    groups: labels of the groups in their natural order; one empty label where nothing was grouped
    also: for each row its second label as text (mode, module or lot; empty where there is none)
    mode_names: what people call the chosen modes, by code
    not_measured: lives whose strokes or hours reach beyond the readings
    """

    component: str
    clock: str
    as_of: dt.date
    by: str | None
    lifetimes: Lifetimes | None
    states: Any
    left_out: list[LeftOut] = field(default_factory=list)
    warnings: list[str] = field(default_factory=list)
    modes: tuple[str, ...] = ()
    if_not_known_failed: Lifetimes | None = None
    component_name: str = ""
    groups: tuple[str, ...] = ()
    also: Any = None
    mode_names: dict[str, str] = field(default_factory=dict)
    not_measured: int = 0
    life_set: str | None = None

    @cached_property
    def _counts(self) -> dict[Any, dict[str, int]]:
        """Lives by group and state, counted once: there may be thousands of groups."""
        import numpy as np

        if self.lifetimes is None:
            return {}
        states, place = np.unique(self.states, return_inverse=True)
        labels = self.lifetimes.group_labels.tolist() or [""]
        keys = self.lifetimes.group_codes * len(states) + place
        totals = np.bincount(keys, weights=self.lifetimes.weights, minlength=len(labels) * len(states))
        table = np.rint(totals).astype(int).reshape(len(labels), len(states)).tolist()
        return {label: dict(zip(states.tolist(), row, strict=True)) for label, row in zip(labels, table, strict=True)}

    def count(self, *states: str, group: Any = None) -> int:
        """Lives in these states, in one group or in all."""
        groups = self._counts.values() if group is None else (self._counts.get(group, {}),)
        return sum(count for each in groups for state, count in each.items() if state in states)


def arrays_of(
    rows: Iterable[LifeRow], sites: dict[Any, str], groups: dict[Any, str], alsos: dict[Any, str] | None = None
) -> tuple[Any, Any, Any]:
    """Life data, states and second labels from rows, in an order that does not depend on the database's numbers."""
    import numpy as np

    from reliability.stats.lifetimes import Lifetimes

    kept: dict[tuple[Any, ...], int] = {}
    for row in rows:
        if row.left_out is None:
            good = -1.0 if row.last_good is None else row.last_good
            label, place = groups.get(row.group, NOT_NAMED), sites.get(row.site, NO_PLACE)
            key = (label, row.duration, row.entry, row.state, good, place, (alsos or {}).get(row.also, ""))
            kept[key] = kept.get(key, 0) + row.count
    if not kept:
        return None, np.array([], dtype=object), np.array([], dtype=object)
    keys = sorted(kept)
    labels, durations, entries, states, last_good, places, also = zip(*keys, strict=True)
    counts = [kept[key] for key in keys]
    goods = np.array(last_good, dtype=float)
    lifetimes = Lifetimes(
        durations=np.array(durations, dtype=float),
        observed=np.array(states) == "failed",
        entries=np.array(entries, dtype=float),
        last_good=np.where(goods < 0, np.nan, goods),
        weights=np.array(counts, dtype=float),
        sites=np.array(places),
        groups=np.array(labels),
    )
    return lifetimes, np.array(states), np.array(also)


def in_order(lifetimes: Lifetimes | None) -> tuple[str, ...]:
    """The labels of the groups, K-9 before K-10."""
    from fleet.models.codes import natural_key

    if lifetimes is None:
        return ()
    return tuple(sorted((str(label) for label in lifetimes.group_labels), key=natural_key))


def with_not_known_failed(lifetimes: Lifetimes, states: Any) -> Lifetimes:
    """The same lives with removals of unknown reason as failures at their age."""
    from reliability.stats.lifetimes import Lifetimes as Rows

    return Rows(
        durations=lifetimes.durations,
        observed=lifetimes.observed | (states == "not known"),
        entries=lifetimes.entries,
        last_good=lifetimes.last_good,
        weights=lifetimes.weights,
        sites=lifetimes.sites,
        groups=lifetimes.groups,
    )


def counted_reasons(rows: Sequence[LifeRow]) -> dict[str, int]:
    """Fittings left out by reason, in the order in which the reasons are written down."""
    from reliability.life_rules import Reason

    totals: dict[str, int] = {}
    for row in rows:
        if row.left_out is not None:
            totals[row.left_out] = totals.get(row.left_out, 0) + row.count
    return {reason.value: totals[reason.value] for reason in Reason if reason.value in totals}
