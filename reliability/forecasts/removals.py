"""Why parts come out without having failed: by chance, or by a rule of planned replacement that the records show."""

from __future__ import annotations

import datetime as dt
from collections import Counter, defaultdict
from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from typing import Any, NamedTuple

from django.db.models import F, Q
from django.utils import timezone

from fleet.models import Component, Fitting, RemovalReason, SiteKind
from reliability.lives_as_known import modules_as_known
from reliability.running_parts import NO_PLACE, known_ended

LATELY = dt.timedelta(days=400)  # planned removals that show a rule
IN_FORCE = dt.timedelta(days=200)  # one at least must be as recent as this
FEWEST, NEAR, MOSTLY, MOST_BEYOND = 5, 0.15, 0.6, 0.25
OUTLIVED = 1.0 + 2.0 * NEAR  # times the age of a rule: a part as old lives by no such rule
FEWEST_SITES, MOST_AGAINST = 2, 0.25  # sites that go by a rule, and the share of them that may not


class Rule(NamedTuple):
    """Planned replacement at an age on a clock: the component's own, or days in service."""

    age: float
    clock: str


@dataclass(frozen=True)
class Removals:
    """Removals for other reasons by part, those under a rule left out, and the rules by site.

    elsewhere: what nearly all sites that could show a rule go by; a site that has not come so far yet goes by it too.
    lived_on: sites without a rule whose parts were let grow older than that.
    """

    by_part: dict[str, int]
    upgrades_lately: dict[str, int]
    rules: dict[str, Rule]
    elsewhere: Rule | None = None
    lived_on: frozenset[str] = frozenset()


class _Planned(NamedTuple):
    site: str
    day: dt.date
    own: float | None
    days: float | None


CHANCE = [RemovalReason.TAKEN_WITH_ANOTHER, RemovalReason.MODULE_WITHDRAWN, RemovalReason.NOT_KNOWN]


def removals(component: Component, as_of: dt.date, known_on: dt.date | None) -> Removals:
    """Of field sites, up to the day and as far as it was known."""
    clock = component.clock
    ended = known_ended(
        Fitting.objects.standing()
        .filter(part__component=component, removed_on__lte=as_of)
        .exclude(clock__site__kind=SiteKind.RIG),
        known_on,
    )
    by_part: Counter[str] = Counter(ended.filter(reason__in=CHANCE).values_list("part__code", flat=True))
    recent = ended.filter(removed_on__gt=as_of - LATELY)
    upgrades = Counter(recent.filter(reason=RemovalReason.UPGRADE).values_list("part__code", flat=True))
    planned, others = _ended_lately(recent, clock, known_on)
    rules = _rules(planned, others, clock, as_of)
    elsewhere, lived_on = _elsewhere(rules, others, clock)
    by_plan = set(rules) if elsewhere is None else (set(planned) - lived_on)
    seen = ended.filter(reason=RemovalReason.PLANNED)
    for part, site in seen.values_list("part__code", "clock__site__code"):
        by_part[part] += (site or NO_PLACE) not in by_plan
    return Removals(dict(by_part), dict(upgrades), rules, elsewhere, frozenset(lived_on))


def _ended_at_ages(recent: Any, clock: str, known_on: dt.date | None) -> Iterator[tuple[Any, ...]]:
    """Reason, site, day, and age on the component's clock and in days; of the past as the clocks were by then."""
    rows = recent.filter(~Q(fitted_on=None))
    if known_on is None or known_on >= timezone.localdate():
        own = F(f"clock__{clock}_at_end") - F(f"clock__{clock}_at_fit") + F("age_at_fit")
        days = F("clock__days_at_end") - F("clock__days_at_fit")
        columns = ("reason", "clock__site__code", "removed_on", "own", "days")
        yield from rows.annotate(own=own, days=days).values_list(*columns)
        return
    modules = set(rows.values_list("module_id", flat=True))
    spans = {span.fitting_id: span for _, clocks in modules_as_known(modules, known_on) for span in clocks.spans}
    for pk, reason, site, day, before in rows.values_list(
        "pk", "reason", "clock__site__code", "removed_on", "age_at_fit"
    ):
        begin, end = (getattr(spans[pk], f"{clock}_at_{which}") for which in ("fit", "end"))
        own_age = None if begin is None or end is None else end - begin + before
        yield reason, site, day, own_age, spans[pk].days_at_end - spans[pk].days_at_fit


_BySite = dict[str, list[_Planned]]


def _ended_lately(recent: Any, clock: str, known_on: dt.date | None) -> tuple[_BySite, _BySite]:
    """Planned removals, and what else ended, by site."""
    planned: _BySite = defaultdict(list)
    others: _BySite = defaultdict(list)
    for reason, site, *found in _ended_at_ages(recent, clock, known_on):
        (planned if reason == RemovalReason.PLANNED else others)[site or NO_PLACE].append(_Planned(site, *found))
    return planned, others


def _elsewhere(rules: dict[str, Rule], others: _BySite, clock: str) -> tuple[Rule | None, set[str]]:
    """The rule in the middle of those of the sites, where few sites speak against it; and the ones that do."""
    clocks = Counter(rule.clock for rule in rules.values())
    usual = max(clocks, key=lambda each: clocks[each], default=clock)
    ages = sorted(rule.age for rule in rules.values() if rule.clock == usual)
    if len(ages) < FEWEST_SITES:
        return None, set()
    rule, column = Rule(ages[len(ages) // 2], usual), "own" if usual == clock else "days"
    lived_on = {
        site
        for site, seen in others.items()
        if site not in rules and any((getattr(each, column) or 0.0) > OUTLIVED * rule.age for each in seen)
    }
    return (rule, lived_on) if len(lived_on) <= MOST_AGAINST * len(rules) else (None, set())


def _rules(planned: _BySite, others: _BySite, clock: str, as_of: dt.date) -> dict[str, Rule]:
    rules = {}
    for site, seen in planned.items():
        if max(each.day for each in seen) <= as_of - IN_FORCE:
            continue
        found_rules = [_rule(seen, others[site], column, name) for column, name in (("own", clock), ("days", "days"))]
        best = min((each for each in found_rules if each is not None), default=None, key=lambda each: each[0])
        if best is not None:
            rules[site] = best[1]
    return rules


def _rule(seen: Iterable[_Planned], others: Iterable[_Planned], column: str, clock: str) -> tuple[float, Rule] | None:
    """The spread of the ages about the rule, and the rule, where most planned removals lie near one age and few parts
    are left to grow older.
    """
    ages = sorted(age for each in seen if (age := getattr(each, column)) is not None)
    if len(ages) < FEWEST:
        return None
    centre = max(ages, key=lambda age: sum(abs(other - age) <= NEAR * age for other in ages))
    near = [age for age in ages if abs(age - centre) <= NEAR * centre]
    if len(near) < max(FEWEST, MOSTLY * len(ages)):
        return None
    age = near[len(near) // 2]
    beyond = sum((getattr(each, column) or 0.0) > OUTLIVED * age for each in others)
    if beyond > MOST_BEYOND * len(near):
        return None
    return (near[-1] - near[0]) / age, Rule(age, clock)
