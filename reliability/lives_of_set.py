"""Imported sets of lives: numbers without histories, on the clock they were imported with."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

from django.db.models import F, Q, Sum

from fleet.models import LifeSet, Part, SetLife, Site
from reliability.fleet_lives import NO_PLACE, FleetLives, LeftOut, LifeRow, arrays_of, counted_reasons, in_order
from reliability.life_question import Asked, keys_of
from reliability.life_rules import Reason


def lives_of_set(asked: Asked, code: str) -> FleetLives:
    rows = list(_rows(asked, chosen_lives(asked, code)))
    grouping = {"part": "part_id", "site": "site"}.get(asked.by or "")
    sites = {row.site: row.site or NO_PLACE for row in rows}
    names: dict[Any, str] = {None: ""}
    if grouping == "part_id":
        names = dict(Part.objects.filter(component=asked.component).values_list("pk", "code"))
    elif grouping == "site":
        names = sites
    lifetimes, states, also = arrays_of(rows, sites, names)
    return FleetLives(
        component=asked.component.code,
        clock=asked.clock,
        as_of=asked.as_of,
        by=asked.by,
        lifetimes=lifetimes,
        states=states,
        also=also,
        left_out=[
            LeftOut(reason, count, left_out_of_set(asked, code, reason))
            for reason, count in counted_reasons(rows).items()
        ],
        component_name=asked.component.title,
        groups=in_order(lifetimes),
        life_set=code,
    )


def chosen_lives(asked: Asked, code: str) -> Any:
    (key,) = keys_of(LifeSet, [code], "set") or ()
    chosen = SetLife.objects.filter(set=key, component=asked.component)
    if asked.parts is not None:
        chosen = chosen.filter(part__in=asked.parts)
    if asked.sites is not None:
        chosen = chosen.filter(site__in=Site.objects.filter(pk__in=asked.sites).values("code"))
    return chosen


def left_out_of_set(asked: Asked, code: str, reason: str) -> Any:
    """The rows of the set that are left out for one reason."""
    chosen, nothing_seen = chosen_lives(asked, code), Q(age__lte=F("entry_age"))
    if reason == Reason.OTHER_CLOCK.value:
        return chosen.exclude(clock=asked.clock)
    return chosen.filter(nothing_seen, clock=asked.clock)


def _rows(asked: Asked, chosen: Any) -> Iterable[LifeRow]:
    grouping = {"part": "part_id", "site": "site"}.get(asked.by or "")
    columns = ["clock", "entry_age", "age", "last_good_age", "observed", "site", "part_id"]
    for clock, entry, age, good, observed, site, part, count in chosen.values_list(*columns).annotate(n=Sum("count")):
        reason = None
        if clock != asked.clock:
            reason = Reason.OTHER_CLOCK.value
        elif age <= entry:
            reason = Reason.NO_AGE.value
        good = None if good is None or not observed or good >= age else max(good, entry)
        label = {"part_id": part, "site": site}.get(grouping) if grouping else None
        state = "failed" if observed else "withdrawn"
        yield LifeRow(reason, state, entry, age, good, site, label, count)
