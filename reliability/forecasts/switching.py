"""One part takes the place of another from certain days on: what the rollout plan says, or what is assumed.

The count knows which part each position takes next by what its site fits now. A plan knows better: of the use drawn
for the old part, the share of its positions that have gone over by a week is used of the new one instead, and each
change of a working part takes one more. That the new part may fail less often is not counted here, which errs towards
more of it.
"""

from __future__ import annotations

import datetime as dt
from collections import Counter
from collections.abc import Iterable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fleet.models import Fitting, Placement, Redesign, RolloutStep, SiteKind
from reliability.forecasts.coming_use import WEEK, ComingUse


@dataclass(frozen=True)
class Switch:
    """share: of the old part's positions that take the new one by the middle of each week; pieces: changed beyond
    failures in each week; until: the day on which the old part goes out of use, None if it does not in these weeks.
    """

    component: str
    old: str
    new: str
    share: tuple[float, ...]
    pieces: tuple[int, ...] = ()
    until: dt.date | None = None
    planned: bool = True  # by a rollout plan; else assumed


def all_switches(uses: Mapping[str, ComingUse], assumed: Iterable[Switch] = ()) -> list[Switch]:
    """Of components whose use is known; what is assumed of a component takes the place of its plans."""
    told = list(assumed)
    elsewhere = {each.component for each in told}
    plans = [plan for plan in planned_switches(uses) if plan.component not in elsewhere]
    return [each for each in [*plans, *told] if uses[each.component].known]


def days_of_use(switches: Iterable[Switch]) -> dict[str, dt.date]:
    """The day on which a part goes out of use, of those that do."""
    return {each.old: each.until for each in switches if each.until is not None}


def switched(uses: Iterable[ComingUse], switches: Iterable[Switch]) -> dict[str, NDArray[np.int64]]:
    """Drawn weeks of every part of these components, after their switches."""
    found: dict[str, NDArray[np.int64]] = {}
    seeds = {}
    for use in uses:
        found.update(use.draws())
        seeds[use.component] = use.seed
    for each in switches:
        if each.old in found and each.new in found:
            move(found, each, seeds[each.component])
    return found


def move(use: dict[str, NDArray[np.int64]], switch: Switch, seed: int) -> None:
    """Each piece of the old part goes over to the new one with the share of its week."""
    rng = np.random.default_rng([seed, *f"{switch.old} {switch.new}".encode()])
    weeks = use[switch.old].shape[1]
    gone = rng.binomial(use[switch.old], np.clip(np.array(switch.share[:weeks]), 0.0, 1.0))
    extra = np.array([*switch.pieces[:weeks], *[0] * (weeks - len(switch.pieces[:weeks]))], dtype=np.int64)
    use[switch.old] = use[switch.old] - gone
    use[switch.new] = use[switch.new] + gone + extra


def assumed_switches(use: ComingUse, new: str, begin: dt.date, a_week: float = 0.0) -> list[Switch]:
    """Every position takes `new` from a day on; `a_week`: working parts of other designs changed a week besides."""
    weeks, found = len(use.weekly), []
    first = (begin - use.begin).days / WEEK
    share = tuple(float(np.clip(week + 1.0 - first, 0.0, 1.0)) for week in range(weeks))
    old = sorted(part for part in use.used if part != new)
    left = sum(count for _, part, _, count in use.standing if part != new)
    pieces = paced(left, a_week, max(first, 0.0), weeks)
    for place, part in enumerate(old):
        # changes of working parts are pieces of the new one, whichever design comes out: counted once
        found.append(Switch(use.component, part, new, share, pieces if place == 0 else (), begin, planned=False))
    return found


def paced(left: int, a_week: float, first: float, weeks: int) -> tuple[int, ...]:
    """Whole pieces in each week at a pace, until none is left to change."""
    done = [min(max(week + 1.0 - first, 0.0) * a_week, float(left)) for week in range(weeks)]
    whole = [int(each + 1e-9) for each in done]
    return tuple(b - a for a, b in zip([0, *whole], whole, strict=False))


def planned_switches(uses: Mapping[str, ComingUse]) -> list[Switch]:
    """What rollout plans still have to do at sites that fit the old part so far. Elsewhere the forecast itself counts
    upgrades, at the pace seen.
    """
    found = []
    for redesign in Redesign.objects.prefetch_related("changes__new_part__component", "changes__replaces"):
        for change in redesign.changes.all():
            use = uses.get(change.new_part.component.code)
            for old in change.replaces.all() if use is not None else ():
                plan = plan_of(redesign, old.code, change.new_part.code, use) if use else None
                if plan is not None:
                    found.append(plan)
    return found


def plan_of(redesign: Redesign, old: str, new: str, use: ComingUse) -> Switch | None:
    """The days still planned, as shares of the positions that take the old part; None without any."""
    sites = use.taking.get(old, {})
    days = dict(
        RolloutStep.objects.standing()
        .filter(redesign=redesign, planned_on__isnull=False, module__scrapped_on=None)
        .values_list("module_id", "planned_on")
    )
    here = Placement.objects.current().filter(module__in=days, site__kind=SiteKind.FIELD, site__code__in=sites)
    placed = set(here.values_list("module_id", flat=True))
    holding = Counter(
        Fitting.objects.running().filter(module__in=placed, part__code=old).values_list("module_id", flat=True)
    )
    if not holding:
        return None
    weeks, whole = len(use.weekly), sum(sites.values())
    pieces = [0] * weeks
    for module, count in holding.items():
        week = max((days[module] - use.begin).days, 0) // WEEK
        if week < weeks:
            pieces[week] += count
    if not any(pieces):
        return None
    done = np.cumsum(pieces)
    share = tuple(float((done[week] - 0.5 * pieces[week]) / whole) for week in range(weeks))
    last = max(max(days[module] for module in holding), use.begin)
    until = last if done[-1] >= whole else None
    return Switch(use.component, old, new, share, tuple(pieces), until)
