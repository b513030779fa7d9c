"""The parts that run on a day, with their age on the component's clock and the pace at which they age."""

from __future__ import annotations

import datetime as dt
import math
from collections import Counter, defaultdict
from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import Any, NamedTuple

from django.db.models import Case, DateField, F, OuterRef, Q, Subquery, When
from django.db.models.functions import Coalesce
from django.utils import timezone

from fleet.formats import counted
from fleet.models import ClockPoint, Component, Fitting, Part, PartState, Placement, Site, SiteKind
from reliability.forecasts.modules_ahead import NEVER, Arrival, ModulesAhead, modules_ahead
from reliability.running_as_known import moment_of, running_as_known

NO_PLACE = "no place"
LATELY_DAYS = 120
FEWEST_LATELY = 3  # fittings at a site that show what it fits now


class RunningRow(NamedTuple):
    """Equal running parts: age now and use a day in the clock's unit, what follows them, where, how many."""

    age: float
    a_day: float
    part: str
    needed: str  # the design that goes in when it fails
    site: str
    type: str
    count: int
    least: bool = False  # the age is the least it can be
    stopped: float = -1.0  # days its module has stood still by now; below 0 while it runs
    joins: float = 0.0  # days until it is there
    leaves: float = NEVER  # days until it is there no more
    seen: float = -1.0  # days since its module was last visited, where failures are found only then
    most: float = 0.0  # with `least`: the most the age can be; infinite where the module's first day is not known


@dataclass(frozen=True)
class RunningParts:
    """Rows for the forecast, and in words what they leave out or assume."""

    component: str
    clock: str
    as_of: dt.date
    rows: list[RunningRow]
    left_out: list[tuple[str, int]] = field(default_factory=list)
    notes: list[str] = field(default_factory=list)

    @property
    def count(self) -> int:
        """Parts in service now, without those that join later."""
        return sum(row.count for row in self.rows if row.joins == 0)


def running_parts(
    component: Component, *, as_of: dt.date, sites: list[str] | None = None, known_on: dt.date | None = None
) -> RunningParts:
    """Parts in service at field sites (or in modules without any stay on record) on the as-of day.

    `known_on` in the past tells it as the book had it by then: see `running_as_known.py`.
    """
    left_out: Counter[str] = Counter()
    found: list[_Found] = []
    then = known_on if known_on is not None and known_on < timezone.localdate() else None
    ahead = modules_ahead(as_of, then)
    wanted = None if sites is None else set(sites)
    for row in _fitted(component, as_of) if then is None else _fitted_as_known(component, as_of, then):
        age, known = _age(row, as_of)
        beyond = None if known else _beyond(row)
        stays = _stays(row, ahead, as_of, left_out)
        if age is None and any(stay.after == 0 for stay in stays):
            left_out["neither readings nor a duty known"] += 1
        for stay in stays:
            if age is not None and (wanted is None or stay.site in wanted):
                code, type_code = row["part_code"], row["type_code"]
                found.append(_Found(age, _pace(row), code, type_code, known, row["module_id"], stay, beyond))
    rows, guessed = _with_pace(found, component.clock, Replacements(component, as_of, then), ahead)
    return RunningParts(
        component=component.code,
        clock=component.clock,
        as_of=as_of,
        rows=rows,
        left_out=sorted((reason, count) for reason, count in left_out.items() if count),
        notes=_notes(rows, guessed),
    )


class _Found(NamedTuple):
    """One running part at one of its module's stays."""

    age: float
    pace: float | None
    part: str
    type: str
    known: bool
    module: int
    stay: Arrival
    beyond: tuple[float, float] | None = None  # see _beyond; None where the age has no upper bound


def _stays(row: dict[str, Any], ahead: ModulesAhead, as_of: dt.date, left_out: Counter[str]) -> list[Arrival]:
    """The stay of today, if it counts, and those planned."""
    coming = ahead.arrives.get(row["module_id"], [])
    place = _left_out(row, as_of)
    if place:
        left_out[place] += 0 if coming else 1
        return coming if not row["scrapped"] or row["scrapped"] > as_of else []
    return [Arrival(0.0, row["site_code"] or NO_PLACE, ahead.leaves.get(row["module_id"], NEVER)), *coming]


def _notes(rows: list[RunningRow], guessed: int) -> list[str]:
    notes = []
    least = sum(row.count for row in rows if row.least and row.joins == 0)
    if least:
        one, many = "part whose fitting day is not known counts", "parts whose fitting day is not known count"
        owner = "it" if least == 1 else "they"
        notes.append(f"{counted(least, one, many)} with every age that {owner} can have.")
    if guessed:
        one, many = "part without readings of its own counts", "parts without readings of their own count"
        notes.append(f"{counted(guessed, one, many)} with the pace of the site or of the fleet.")
    joining = sum(row.count for row in rows if row.joins > 0)
    if joining:
        notes.append(f"{counted(joining, 'part joins', 'parts join')} on the day planned for the module.")
    leaving = sum(row.count for row in rows if row.joins == 0 and row.leaves < NEVER)
    if leaving:
        notes.append(f"{counted(leaving, 'part leaves', 'parts leave')} on the day planned for the module.")
    return notes


def _fitted(component: Component, as_of: dt.date) -> Any:
    """Fittings running on the day, the module's clock on both sides of it, and where the module stands."""
    clock = component.clock
    knots = ClockPoint.objects.filter(module=OuterRef("module_id"))
    moment = moment_of(as_of, clock)
    before = knots.filter(day__lte=moment).order_by("-day")
    after = knots.filter(day__gt=moment).order_by("day")
    stay = Placement.objects.on(as_of).filter(module=OuterRef("module_id"))
    first = Placement.objects.standing().filter(module=OuterRef("module_id")).order_by("from_on")
    return (
        Fitting.objects.standing()
        .filter(Q(removed_on=None) | Q(removed_on__gt=as_of), part__component=component)
        .filter(Q(fitted_on=None) | Q(fitted_on__lte=as_of))
        .values(
            "age_at_fit",
            "fitted_on",
            "module_id",
            part_code=F("part__code"),
            type_code=F("module__type__code"),
            scrapped=F("module__scrapped_on"),
            at_fit=F(f"clock__{clock}_at_fit"),
            at_records=F(f"clock__{clock}_at_records"),
            before_day=Subquery(before.values("day")[:1]),
            before=Subquery(before.values(clock)[:1]),
            after_day=Subquery(after.values("day")[:1]),
            after=Subquery(after.values(clock)[:1]),
            site_code=Subquery(stay.values("site__code")[:1]),
            site_kind=Subquery(stay.values("site__kind")[:1]),
            placed=Subquery(first.values("from_on")[:1]),
            built=F("module__built_on"),
        )
        .order_by("module_id", "position_id")
    )


def _fitted_as_known(component: Component, as_of: dt.date, known_on: dt.date) -> Iterator[dict[str, Any]]:
    """The same rows from what had reached the book by that day."""
    fittings = (
        Fitting.objects.standing()
        .filter(part__component=component)
        .order_by("module_id", "position_id")
        .values(
            "pk", "age_at_fit", "fitted_on", "module_id", part_code=F("part__code"), type_code=F("module__type__code")
        )
    )
    places = {pk: (code, kind) for pk, code, kind in Site.objects.values_list("pk", "code", "kind")}
    return running_as_known(list(fittings), places, component.clock, as_of, known_on)


def _left_out(row: dict[str, Any], as_of: dt.date) -> str:
    """Why a running part is not counted; empty for those that are."""
    if row["scrapped"] and row["scrapped"] <= as_of:
        return "in a scrapped module"
    if row["site_kind"] == SiteKind.RIG:
        return "on a test stand"
    if row["site_kind"] == SiteKind.DEPOT:
        return "at a depot"
    return "in a module without a place" if row["placed"] and row["site_code"] is None else ""


def _age(row: dict[str, Any], as_of: dt.date) -> tuple[float | None, bool]:
    """The age on the day, and whether it is known (else it is the least it can be)."""
    now = row["before"]
    if now is None:
        return None, False
    if row["after"] is not None and row["after_day"] > row["before_day"]:
        share = (as_of.toordinal() - row["before_day"]) / (row["after_day"] - row["before_day"])
        now += (row["after"] - row["before"]) * share
    known = row["fitted_on"] is not None
    start = row["at_fit"] if known else row["at_records"]
    if start is None:
        start = 0.0 if not known else None
    return (None, known) if start is None else (max(0.0, row["age_at_fit"] + now - start), known)


def _beyond(row: dict[str, Any]) -> tuple[float, float] | None:
    """By how much a part of unknown age can be older than it is at least: on its module's clock before records began,
    and in days since the module was built of which no place is on record. None where nobody knows when it was built.
    """
    if row["built"] is None:
        return None
    # without any place on record the clock itself begins on the day it was built
    days = 0 if row["placed"] is None else (row["placed"] - row["built"]).days
    return max(row["at_records"] or 0.0, 0.0), float(max(days, 0))


def _most(found: _Found, use: float) -> float:
    if found.known:
        return 0.0
    if found.beyond is None:
        return math.inf
    on_clock, days = found.beyond
    return round(found.age + on_clock + days * use, 1)


def _pace(row: dict[str, Any]) -> float | None:
    """Use a day just now; none where the clock stands (a stopped module) or is not known."""
    if row["after"] is None or row["before"] is None or row["after_day"] <= row["before_day"]:
        return None
    return (row["after"] - row["before"]) / (row["after_day"] - row["before_day"]) or None


def _with_pace(
    found: list[_Found], clock: str, replacements: Replacements, ahead: ModulesAhead
) -> tuple[list[RunningRow], int]:
    """Equal parts as one row; who has no pace takes the median of the site, else of all."""
    if clock == "days":
        found = [each._replace(pace=1.0) for each in found]
    by_site: dict[str, list[float]] = defaultdict(list)
    for each in found:
        if each.pace is not None and each.stay.after == 0:
            by_site[each.stay.site].append(each.pace)
    everywhere = _median([pace for paces in by_site.values() for pace in paces])
    counts: Counter[tuple[Any, ...]] = Counter()
    guessed = 0
    for each in found:
        guessed += each.pace is None
        site = each.stay.site
        use = each.pace if each.pace is not None else _median(by_site[site]) or everywhere
        now = each.stay.after == 0
        further = (
            not each.known,
            ahead.stopped.get(each.module, -1.0) if now else -1.0,
            each.stay.after,
            each.stay.leaves,
            ahead.seen.get(each.module, -1.0),
            _most(each, use),
        )
        needed = replacements.of(each.part, site)
        counts[(round(each.age, 1), float(f"{use:.4g}"), each.part, needed, site, each.type, *further)] += 1
    rows = [RunningRow(*key[:6], count, *key[6:]) for key, count in sorted(counts.items())]
    return rows, guessed


def _median(values: list[float]) -> float:
    ordered = sorted(values)
    return ordered[len(ordered) // 2] if ordered else 0.0


class Replacements:
    """Which design goes in when a part fails: what its site fitted lately, else the end of the chain of designs."""

    def __init__(self, component: Component, as_of: dt.date, known_on: dt.date | None = None) -> None:
        self.lately: dict[str, Counter[str]] = defaultdict(Counter)
        since = as_of - dt.timedelta(days=LATELY_DAYS)
        standing, site, designs = (
            Fitting.objects.standing().filter(part__component=component),
            "clock__site__code",
            None,
        )
        if known_on is not None:
            standing, site = _known_by(standing, known_on), "site_then"
            designs = set(standing.values_list("part__code", flat=True))
        fitted = standing.filter(fitted_on__gt=since, fitted_on__lte=as_of)
        for code, part in fitted.values_list(site, "part__code"):
            self.lately[code or NO_PLACE][part] += 1
        self.chains = chains_of(component, designs)

    def of(self, part: str, site: str) -> str:
        chain = self.chains[part]
        counts = self.lately[site]
        best = max(chain, key=lambda each: (counts[each], chain.index(each)))
        return best if counts[best] >= FEWEST_LATELY else chain[-1]


FITTED_KNOWN = ("fitted_known_on", "fitted_visit__known_on", "fitted_on")
REMOVED_KNOWN = ("removed_known_on", "removed_visit__known_on", "removed_on")


def known_ended(fittings: Any, known_on: dt.date | None) -> Any:
    """Those of which both ends had reached the book by the day; all where no day is given."""
    if known_on is None:
        return fittings
    both = fittings.annotate(fitted_known=Coalesce(*FITTED_KNOWN), removed_known=Coalesce(*REMOVED_KNOWN))
    return both.filter(Q(fitted_known=None) | Q(fitted_known__lte=known_on), removed_known__lte=known_on)


def _known_by(fittings: Any, known_on: dt.date) -> Any:
    """Fittings that had reached the book by the day, and the site at which the module last served by then."""
    until = Case(When(removed_known__lte=known_on, then="removed_on"), default=known_on, output_field=DateField())
    served = Placement.objects.standing().exclude(site__kind=SiteKind.DEPOT).order_by("-from_on", "-pk")
    here = served.filter(module=OuterRef("module_id"), from_on__lte=OuterRef("until")).values("site__code")[:1]
    return (
        fittings.annotate(fitted_known=Coalesce(*FITTED_KNOWN), removed_known=Coalesce(*REMOVED_KNOWN))
        .filter(Q(fitted_known=None) | Q(fitted_known__lte=known_on))
        .annotate(until=until)
        .annotate(site_then=Subquery(here))
    )


def chains_of(component: Component, designs: set[str] | None = None) -> dict[str, list[str]]:
    """For each part itself and the current designs that supersede it, one after the other; `designs`: only these."""
    parts = {part.pk: part for part in Part.objects.filter(component=component)}
    newer = {
        part.supersedes_id: part
        for part in sorted(parts.values(), key=lambda part: part.code_order)
        if part.state == PartState.CURRENT and part.supersedes_id and (designs is None or part.code in designs)
    }
    chains = {}
    for part in parts.values():
        chain = [part]
        while chain[-1].pk in newer and newer[chain[-1].pk] not in chain:
            chain.append(newer[chain[-1].pk])
        chains[part.code] = [each.code for each in chain]
    return chains
