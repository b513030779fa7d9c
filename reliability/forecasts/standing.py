"""Modules that stand still: what share of their days they run, how long stops last, and which part they wait for."""

from __future__ import annotations

import datetime as dt
from collections import Counter, defaultdict
from dataclasses import dataclass

from django.db.models import Q
from django.db.models.functions import Coalesce

from fleet.models import FAILURE_REASONS, Fitting, Placement, SiteKind, Stop
from reliability.running_parts import FITTED_KNOWN, REMOVED_KNOWN, known_ended

STOPS_SINCE = dt.timedelta(days=365)
MOST_STOPS, MOST_MODULES = 4000, 500
DAYS_DOWN = 7.0  # where no stop is on record


@dataclass(frozen=True)
class Standing:
    """Share of its days a site's modules run, and how long past stops lasted, in days, in order."""

    running: dict[str, float]
    everywhere: float
    durations: list[float]

    def share(self, site: str) -> float:
        return self.running.get(site, self.everywhere)

    def days_left(self, stood: float) -> float:
        """Days until a module that has stood so long runs again, on the mean of the stops that lasted longer."""
        longer = [each - stood for each in self.durations if each > stood]
        if longer:
            return max(sum(longer) / len(longer), 0.25)
        return DAYS_DOWN if not self.durations else max(self.durations[-1] / 2, 1.0)


def standing(as_of: dt.date, known_on: dt.date | None) -> Standing:
    """From the stops of the past year; a site's share is drawn towards the fleet's by a tenth of its days."""
    end = dt.datetime.combine(as_of, dt.time(), dt.UTC)
    begin = end - STOPS_SINCE
    stops = Stop.objects.standing().filter(Q(running_at=None) | Q(running_at__gt=begin), stopped_at__lt=end)
    if known_on is not None:
        stops = stops.filter(known_on__lte=known_on)
    lost: dict[str, float] = defaultdict(float)
    durations: list[float] = []
    for site, since, until in stops.values_list("site__code", "stopped_at", "running_at"):
        over = min(until or end, end)
        lost[site or ""] += max((over - max(since, begin)).total_seconds(), 0.0) / 86400
        if until is not None and until <= end:
            durations.append((until - since).total_seconds() / 86400)
    days = _days_there(as_of)
    whole = sum(days.values())
    everywhere = 1.0 - min(sum(lost.values()) / whole, 0.9) if whole else 1.0
    running = {
        site: 1.0 - min((lost[site] + 0.1 * there * (1.0 - everywhere)) / (1.1 * there), 0.9)
        for site, there in days.items()
    }
    durations.sort()
    thinned = durations[:: max(1, len(durations) // MOST_STOPS)]
    return Standing(running, everywhere, [round(each, 3) for each in thinned])


def _days_there(as_of: dt.date) -> dict[str, float]:
    """Module days at field sites in the past year."""
    begin = as_of - STOPS_SINCE
    stays = Placement.objects.standing().filter(
        Q(to_on=None) | Q(to_on__gt=begin), from_on__lt=as_of, site__kind=SiteKind.FIELD
    )
    days: dict[str, float] = defaultdict(float)
    for site, since, until in stays.values_list("site__code", "from_on", "to_on"):
        days[site] += max((min(until or as_of, as_of) - max(since, begin)).days, 0)
    return {site: there for site, there in days.items() if there > 0}


def stop_shares(component_pk: int, as_of: dt.date, known_on: dt.date | None) -> float:
    """Chance of one position that its part failed where a module stood still: new parts of this component after a
    failure over parts of it that were there, in the past year's ended stops.
    """
    end = dt.datetime.combine(as_of, dt.time(), dt.UTC)
    stops = Stop.objects.standing().filter(running_at__lte=end, stopped_at__gt=end - STOPS_SINCE)
    if known_on is not None:
        stops = stops.filter(known_on__lte=known_on)
    spans: dict[int, list[tuple[dt.date, dt.date]]] = defaultdict(list)
    for module, since, until in stops.order_by("-stopped_at").values_list("module_id", "stopped_at", "running_at")[
        :MOST_STOPS
    ]:
        spans[module].append((since.date(), until.date()))
    known = list(spans)[:MOST_MODULES]
    removed: dict[int, list[dt.date]] = defaultdict(list)
    fittings = Fitting.objects.standing().filter(
        part__component=component_pk,
        reason__in=FAILURE_REASONS,
        removed_on__lte=as_of,
        removed_on__gt=as_of - STOPS_SINCE - dt.timedelta(days=30),
        module__in=known,
    )
    for module, day in known_ended(fittings, known_on).values_list("module_id", "removed_on"):
        removed[module].append(day)
    parts = _parts(component_pk, known, as_of, known_on)
    whole = sum(len(spans[module]) * parts[module] for module in known)
    caused = sum(
        sum(since <= day <= until for day in removed[module]) for module in known for since, until in spans[module]
    )
    return min((caused + 0.5) / (whole + 1.0), 1.0) if whole else 1.0


def _parts(component_pk: int, modules: list[int], as_of: dt.date, known_on: dt.date | None) -> Counter[int]:
    """How many parts of the component each module holds, as known by then; those that hold none now had one."""
    gone, fitted = Q(removed_on__lte=as_of), Q(fitted_on=None) | Q(fitted_on__lte=as_of)
    parts = Fitting.objects.standing().filter(part__component=component_pk, module__in=modules)
    if known_on is not None:
        parts = parts.annotate(fitted_known=Coalesce(*FITTED_KNOWN), removed_known=Coalesce(*REMOVED_KNOWN))
        gone &= Q(removed_known__lte=known_on)
        fitted &= Q(fitted_known=None) | Q(fitted_known__lte=known_on)
    counts = Counter(parts.filter(fitted).exclude(gone).values_list("module_id", flat=True))
    return Counter({module: max(counts[module], 1) for module in modules})
