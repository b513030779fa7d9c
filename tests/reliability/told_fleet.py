"""Random fleets as plain stories in whole hours, and the same stories written into the book."""

from __future__ import annotations

import random
from dataclasses import dataclass, field, replace

from fleet.models import Module
from tests.reliability.small_fleet import SmallFleet, day

REASONS = ["failed", "failed", "failed", "worn to limit", "planned", "taken with another", "not known"]
FIRST_DAY, LAST_DAY = 0, 300
SITES = {  # name -> (kind, every failure reported at once, records kept from day)
    "LOCK": ("field", True, None),
    "MILL": ("field", True, 60),
    "WEIR": ("field", False, None),
    "POND": ("field", None, 40),
    "RIG": ("rig", True, None),
    "DEPOT": ("depot", None, None),
}


@dataclass(frozen=True)
class ToldStay:
    site: str
    since: int
    until: int | None


@dataclass(frozen=True)
class ToldVisit:
    hour: int
    known: int


@dataclass(frozen=True)
class ToldReading:
    hour: int
    strokes: int
    known: int


@dataclass(frozen=True)
class ToldFitting:
    name: str
    fitted: int | None
    removed: int | None = None
    reason: str = ""
    failed: int | None = None
    last_good: int | None = None
    age_at_fit: int = 0
    mode: str = ""
    fitted_known: int | None = None
    removed_known: int | None = None


@dataclass
class ToldModule:
    tag: str
    stays: list[ToldStay] = field(default_factory=list)
    stops: list[tuple[int, int | None]] = field(default_factory=list)
    visits: list[ToldVisit] = field(default_factory=list)
    readings: list[ToldReading] = field(default_factory=list)
    fittings: list[ToldFitting] = field(default_factory=list)
    records_from: int | None = None


def tell_module(rng: random.Random, tag: str) -> ToldModule:
    module = ToldModule(tag, records_from=rng.choice([None] * 5 + [80]))
    _tell_stays(rng, module)
    for since in sorted(rng.sample(range(FIRST_DAY * 24, LAST_DAY * 24), rng.randrange(4))):
        if not module.stops or (module.stops[-1][1] is not None and module.stops[-1][1] < since):
            module.stops.append((since, rng.choice([since + rng.randrange(1, 400), since + 24])))
    if module.stops and rng.random() < 0.2:
        module.stops[-1] = (module.stops[-1][0], None)
    for hour in sorted(rng.sample(range(LAST_DAY * 24), rng.randrange(10))):
        module.visits.append(ToldVisit(hour, hour // 24 + _delay(rng)))
    _tell_readings(rng, module)
    for position in range(3):
        _tell_fittings(rng, module, position)
    return module


def _delay(rng: random.Random) -> int:
    return rng.choice([0, 0, 0, 0, 2, 9])


def _tell_stays(rng: random.Random, module: ToldModule) -> None:
    if rng.random() < 0.1:
        return
    since, names = -20, list(SITES)
    for _ in range(rng.randrange(1, 4)):
        until = since + rng.randrange(30, 200)
        module.stays.append(ToldStay(rng.choice(names), since, until))
        since = until + rng.choice([0, 0, 0, 5])
    module.stays.append(ToldStay(rng.choice(names), since, None))


def _tell_readings(rng: random.Random, module: ToldModule) -> None:
    """From before the first fitting to after the last event, so that every count lies between two readings."""
    hours = [FIRST_DAY * 24 - 480, *sorted(rng.sample(range(24, LAST_DAY * 24), rng.randrange(8))), LAST_DAY * 24 + 600]
    strokes = 0
    for hour in hours:
        module.readings.append(ToldReading(hour, strokes, hour // 24))
        strokes += rng.choice([0, rng.randrange(1, 60_000)])


def _tell_fittings(rng: random.Random, module: ToldModule, position: int) -> None:
    now = rng.randrange(60)
    for place in range(rng.randrange(1, 5)):
        end = now + rng.choice([0, rng.randrange(1, 120)])
        fitted = None if place == 0 and rng.random() < 0.15 else now
        told = ToldFitting(f"{module.tag}-{position}-{place}", fitted, age_at_fit=rng.choice([0, 0, 0, 0, 17]))
        told = replace(told, fitted_known=now + _delay(rng))
        if end >= LAST_DAY:
            module.fittings.append(told)
            return
        module.fittings.append(_ended(rng, told, now, end))
        now = end + rng.choice([0, 0, 0, 3])
    module.fittings.append(ToldFitting(f"{module.tag}-{position}-now", now, fitted_known=now + _delay(rng)))


def _ended(rng: random.Random, told: ToldFitting, begun: int, end: int) -> ToldFitting:
    reason = rng.choice(REASONS)
    failing = reason in {"failed", "worn to limit"}
    failed = rng.randrange(begun, end + 1) if failing and rng.random() < 0.4 else None
    latest = end if failed is None else failed
    return replace(
        told,
        removed=end,
        reason=reason,
        failed=failed,
        last_good=rng.randrange(begun, latest + 1) if failing and rng.random() < 0.3 else None,
        mode=rng.choice(["", "WORN", "STRIPPED"]) if failing else "",
        removed_known=end + _delay(rng),
    )


def write_fleet(fleet: SmallFleet, modules: list[ToldModule]) -> None:
    sites = {
        name: fleet.site(name, kind=kind, reports_at_once=at_once, records_from=None if began is None else day(began))
        for name, (kind, at_once, began) in SITES.items()
    }
    modes = {"WORN": fleet.worn, "STRIPPED": fleet.stripped, "": None}
    for told in modules:
        began = None if told.records_from is None else day(told.records_from)
        module: Module = fleet.module(told.tag, None, records_from=began)
        for stay in told.stays:
            until = None if stay.until is None else day(stay.until)
            module.placements.create(site=sites[stay.site], from_on=day(stay.since), to_on=until)
        for since, until_hour in told.stops:
            fleet.stop(module, since / 24, None if until_hour is None else until_hour / 24)
        for visit in told.visits:
            fleet.visit(module, visit.hour / 24, known=visit.known)
        for reading in told.readings:
            fleet.read(module, reading.hour / 24, known=reading.known, strokes=reading.strokes)
        for fitting in told.fittings:
            fleet.fit(
                module,
                fitting.fitted,
                fitting.removed,
                fitting.reason,
                failed=fitting.failed,
                last_good=fitting.last_good,
                known=fitting.removed_known,
                age_at_fit=fitting.age_at_fit,
                mode=modes[fitting.mode],
                fitted_known_on=None if fitting.fitted_known is None else day(fitting.fitted_known),
                serial=fitting.name,
            )
