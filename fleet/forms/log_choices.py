"""Everything the log form offers for one module, fetched once: a fixed number of queries for any type."""

from __future__ import annotations

import datetime as dt
from collections import Counter, defaultdict
from collections.abc import Iterable
from dataclasses import dataclass, field

from django.db.models import Sum

from fleet.models import (
    Component,
    Condition,
    FailureMode,
    Finding,
    Fitting,
    FoundKind,
    Module,
    Part,
    PartState,
    Person,
    Position,
    StockBalance,
    Store,
)
from fleet.module_place import Seen, Standing, standing_of
from fleet.position_names import position_names

STATES = [PartState.CURRENT, PartState.ON_TRIAL, PartState.ENDED]


@dataclass
class PositionChoices:
    """What may be said about one position."""

    position: Position
    name: str
    fitting: Fitting | None
    modes: list[FailureMode]
    parts: list[Part]
    likely: Part | None
    carried: dict[int, int] = field(default_factory=dict)  # new parts in the person's own stores, by part
    failed_on: dt.date | None = None  # the day on which an earlier visit found the part failed and left it in

    @property
    def component(self) -> Component:
        return self.position.component


@dataclass
class LogChoices:
    module: Module
    standing: Standing
    positions: list[PositionChoices] = field(default_factory=list)
    stores: list[Store] = field(default_factory=list)  # what the person carries along

    @property
    def counts_hours(self) -> bool:
        """Whether the hour meter belongs into sight: a part's life is counted in hours, or it was read before."""
        last = self.standing.reading
        return any(each.component.clock == "hours" for each in self.positions) or bool(last and last.hours is not None)


def log_choices(seen: Seen, module: Module, person: Person | None = None) -> LogChoices:
    positions = list(
        seen(Position).filter(type=module.type_id).select_related("component").order_by("order", "code_order")
    )
    names = position_names(positions)
    components = {position.component_id for position in positions}
    fitted = {
        fitting.position_id: fitting
        for fitting in seen(Fitting).running().filter(module=module).select_related("part", "position")
    }
    modes: dict[int, list[FailureMode]] = defaultdict(list)
    for mode in seen(FailureMode).filter(component__in=components).order_by("code_order"):
        modes[mode.component_id].append(mode)
    seen_often = often_seen(seen, modes)
    for some in modes.values():
        some.sort(key=lambda mode: -seen_often[mode.pk])
    parts = parts_by_component(seen, module, components)
    likely = Likely(seen, module, parts)
    failed = days_found_failed(seen, module, fitted.values())
    stores = list(seen(Store).own_of(person).order_by("code_order")) if person is not None else []
    carried = carried_parts(seen, stores)
    return LogChoices(
        module,
        standing_of(seen, module),
        [
            PositionChoices(
                position,
                names[position.pk],
                fitted.get(position.pk),
                modes[position.component_id],
                parts[position.component_id],
                likely.part(position.component_id, fitted.get(position.pk)),
                carried,
                failed.get(position.pk),
            )
            for position in positions
        ],
        stores,
    )


def carried_parts(seen: Seen, stores: list[Store]) -> dict[int, int]:
    """How many of each part lie in these stores, new."""
    if not stores:
        return {}
    rows = seen(StockBalance).filter(store__in=stores, condition=Condition.NEW, on_hand__gt=0).order_by()
    return dict(rows.values_list("part").annotate(n=Sum("on_hand")))


def often_seen(seen: Seen, modes: dict[int, list[FailureMode]]) -> Counter[int]:
    """How often each mode was the answer lately, so that the usual one stands first under the thumb."""
    keys = [mode.pk for some in modes.values() for mode in some]
    return Counter(
        seen(Fitting).standing().filter(mode__in=keys).order_by("-pk").values_list("mode_id", flat=True)[:400]
    )


def parts_by_component(seen: Seen, module: Module, components: set[int]) -> dict[int, list[Part]]:
    """Current designs first, then others in use, then ended ones that may still lie on a shelf."""
    parts: dict[int, list[Part]] = defaultdict(list)
    for part in seen(Part).filter(component__in=components).fitting_type(module.type).order_by("code_order"):
        parts[part.component_id].append(part)
    for some in parts.values():
        replaced = {part.supersedes_id for part in some if part.state == PartState.CURRENT}
        some.sort(key=lambda part: (STATES.index(PartState(part.state)), part.pk in replaced))
    return parts


class Likely:
    """Which part probably goes in: the current design; of several, or of none, the one last used here or elsewhere."""

    def __init__(self, seen: Seen, module: Module, parts: dict[int, list[Part]]) -> None:
        self.parts = parts
        self.designs = {component: current_designs(some) for component, some in parts.items()}
        unsure = {component for component, some in self.designs.items() if len(some) != 1}
        self.last_used = last_used_parts(seen, module, unsure) if unsure else {}

    def part(self, component: int, fitting: Fitting | None) -> Part | None:
        designs = self.designs.get(component, [])
        if len(designs) == 1:
            return designs[0]
        among = designs or self.parts.get(component, [])
        for wanted in (fitting.part_id if fitting else None, self.last_used.get(component)):
            for part in among:
                if part.pk == wanted:
                    return part
        return among[0] if among else None


def current_designs(parts: Iterable[Part]) -> list[Part]:
    """Among the parts that fit: current, and not superseded by a current one that fits as well."""
    current = [part for part in parts if part.state == PartState.CURRENT]
    replaced = {part.supersedes_id for part in current}
    return [part for part in current if part.pk not in replaced]


def last_used_parts(seen: Seen, module: Module, components: set[int]) -> dict[int, int]:
    """The part last fitted of each component, in this type of module."""
    used = (
        seen(Fitting)
        .standing()
        .filter(module__type=module.type_id, part__component__in=components, fitted_on__isnull=False)
        .order_by("fitted_on", "id")
        .values_list("part__component_id", "part_id")
    )
    return dict(used.reverse()[:200][::-1])


def days_found_failed(seen: Seen, module: Module, fittings: Iterable[Fitting]) -> dict[int, dt.date]:
    """By position: the first day since its part was fitted on which a crew found it failed but left it in."""
    since = {fitting.position_id: fitting.fitted_on or dt.date.min for fitting in fittings}
    found = (
        seen(Finding)
        .standing()
        .filter(visit__module=module, visit__struck_out="", finding=FoundKind.FAILED, position__in=since)
        .order_by("-visit__happened_on")
        .values_list("position_id", "visit__happened_on")
    )
    return {position: day for position, day in found if day >= since[position]}
