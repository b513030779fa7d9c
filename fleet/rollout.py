"""How far a rollout has come: planned days beside what visits have logged, by module and by site."""

from __future__ import annotations

import datetime as dt
from collections import Counter, defaultdict
from collections.abc import Iterable
from dataclasses import dataclass

from django.db.models import Count, Min

from fleet.formats import counted, number
from fleet.models import Fitting, Position, Redesign


@dataclass(frozen=True)
class Upgraded:
    """One module: how many of its positions have had the new part, and the day the last of them got it."""

    positions: int
    upgraded: int
    last_on: dt.date | None

    @property
    def done(self) -> bool:
        return self.positions > 0 and self.upgraded >= self.positions

    @property
    def done_on(self) -> dt.date | None:
        return self.last_on if self.done else None


@dataclass(frozen=True)
class SiteProgress:
    site: str
    modules: int
    done: int
    begun: int
    late: int


def upgraded_modules(redesign: Redesign, modules: Iterable[tuple[int, int]]) -> dict[int, Upgraded]:
    """By module, for pairs of (module, its type); two queries, however many modules."""
    changes = list(redesign.changes.select_related("new_part"))
    new_parts = [line.new_part_id for line in changes]
    components = [line.new_part.component_id for line in changes]
    per_type = dict(
        Position.objects.filter(component__in=components).values_list("type").annotate(n=Count("pk")).order_by()
    )
    fitted = (
        Fitting.objects.standing()
        .filter(part__in=new_parts)
        .values("module", "position")
        .annotate(first=Min("fitted_on"))
        .order_by()
    )
    upgraded: Counter[int] = Counter()
    last: dict[int, dt.date] = {}
    for row in fitted:
        upgraded[row["module"]] += 1
        if row["first"] is not None:
            last[row["module"]] = max(row["first"], last.get(row["module"], row["first"]))
    return {module: Upgraded(per_type.get(kind, 0), upgraded[module], last.get(module)) for module, kind in modules}


def positions_left(redesign: Redesign, modules: Iterable[tuple[int, int]]) -> dict[int, int]:
    """By component, for pairs of (module, its type): positions that have not had their new part."""
    changes = list(redesign.changes.select_related("new_part"))
    components = [line.new_part.component_id for line in changes]
    places: dict[int, list[tuple[int, int]]] = defaultdict(list)
    for position, kind, component in Position.objects.filter(component__in=components).values_list(
        "pk", "type", "component"
    ):
        places[kind].append((position, component))
    fitted = Fitting.objects.standing().filter(part__in=[line.new_part_id for line in changes])
    done = set(fitted.values_list("module", "position"))
    left: Counter[int] = Counter(dict.fromkeys(components, 0))
    for module, kind in modules:
        left.update(component for position, component in places[kind] if (module, position) not in done)
    return dict(left)


def upgraded_outside(redesign: Redesign, planned: set[int]) -> int:
    """Modules with the new part that no plan names."""
    parts = redesign.changes.values("new_part")
    fitted = Fitting.objects.standing().filter(part__in=parts).values_list("module", flat=True).distinct()
    return len(set(fitted) - planned)


def by_site(rows: Iterable[tuple[str, dt.date | None, Upgraded]], today: dt.date) -> list[SiteProgress]:
    """Rows of (site, planned day, what was done) added up, sites in the order in which they come."""
    counts: dict[str, Counter[str]] = defaultdict(Counter)
    for site, planned_on, upgraded in rows:
        count = counts[site]
        count["modules"] += 1
        count["done"] += upgraded.done
        count["begun"] += bool(upgraded.upgraded) and not upgraded.done
        count["late"] += is_late(planned_on, upgraded, today)
    return [
        SiteProgress(site, *(count[key] for key in ("modules", "done", "begun", "late")))
        for site, count in counts.items()
    ]


def done_words(done: int, modules: int, components: int) -> str:
    """How far the plan has come, in one sentence."""
    what = "the new part" if components == 1 else "the new parts"
    have = "has" if done == 1 else "have"
    return f"{number(done)} of {counted(modules, 'planned module')} {have} {what} in every position."


def is_late(planned_on: dt.date | None, upgraded: Upgraded, today: dt.date) -> bool:
    return planned_on is not None and planned_on < today and not upgraded.done
