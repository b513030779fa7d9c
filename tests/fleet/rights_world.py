"""Two sites with the same records, people of every role on one of them, and an address for every page."""

from __future__ import annotations

import re
import uuid
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

from django.urls import URLPattern, URLResolver, get_resolver

from fleet.models import (
    BenchHours,
    BenchJob,
    Finding,
    LooksWrong,
    Person,
    Reading,
    Redesign,
    Role,
    RolloutStep,
    Stop,
    SupplyLine,
    SupplyOrder,
    Visit,
    Work,
)
from tests import factories as make
from tests.reliability.kept_forecasts import make_kept_forecast

# Pages of the framework's own static files are served to everybody.
NOT_OURS = {"static"}


KINDS = ("visit", "fitting", "finding", "stop", "reading", "placement")
# Corrected and struck out at the same addresses, but nobody marks them as looking wrong.
STOCKED = ("move", "job", "hours")
STAYS = {("correct_record", "reading"), ("correct_record", "move")}  # struck out and entered again


@dataclass(frozen=True)
class Route:
    """One address of the site map."""

    pattern: str
    name: str
    view: Any
    names: tuple[str, ...]

    @property
    def right(self) -> str | None:
        return getattr(self.view, "right", None)


def routes(patterns: Any = None, prefix: str = "") -> Iterator[Route]:
    for entry in patterns if patterns is not None else get_resolver().url_patterns:
        path = prefix + str(entry.pattern)
        if isinstance(entry, URLResolver):
            yield from routes(entry.url_patterns, path)
        elif isinstance(entry, URLPattern) and entry.name not in NOT_OURS:
            names = tuple(entry.pattern.converters)
            yield Route(path, entry.name or path, entry.callback, names)


class Place:
    """A site with one of everything that can be asked for by address."""

    def __init__(self) -> None:
        carriage = make.Carriage()
        self.carriage, self.site, self.module = carriage, carriage.site, carriage.module
        known = {"module": self.module, "site": self.site}
        at = make.at("2026-03-09")
        self.visit = Visit.objects.create(
            code=f"V-{make.number()}", happened_at=at, happened_on=at.date(), known_on=at.date(), **known
        )
        self.fitting = make.make_fitting(module=self.module, position=carriage.nut, part=carriage.n1)
        self.finding = Finding.objects.create(visit=self.visit, position=carriage.nut, finding="adjusted")
        self.stop = Stop.objects.create(stopped_at=at, running_at=at, known_on=at.date(), **known)
        self.reading = Reading.objects.create(read_at=at, strokes=5, known_on=at.date(), **known)
        self.placement = self.module.placements.get()
        self.mark = LooksWrong.objects.create(
            kind="visit", record=self.visit.pk, word="twice", said_by=carriage.manager, **known
        )
        self.redesign = Redesign.objects.create(code=f"R-{make.number()}")
        self.step = RolloutStep.objects.create(redesign=self.redesign, module=self.module, order=1)
        self.kept = make_kept_forecast(component=carriage.nuts, made_by=carriage.manager, sites=[self.site])
        self.work = Work.objects.create(kind="import_records", person=carriage.manager)

        self.store = make.make_store(code=f"WEIR-SHELF-{make.number()}", site=self.site)
        self.move = make.stock(self.store, carriage.n1, 5)
        self.order = SupplyOrder.objects.create(code=f"SO-{make.number()}", ordered_on=at.date())
        self.line = SupplyLine.objects.create(order=self.order, part=carriage.n1, quantity=3)
        self.job = BenchJob.objects.create(
            code=f"J-{make.number()}", module=self.module, depot=self.site, received_on=at.date()
        )
        self.hours = BenchHours.objects.create(job=self.job, person=carriage.manager, day=at.date(), hours=1)

    def record(self, kind: str) -> Any:
        return getattr(self, kind)

    def addresses(self, route: Route) -> Iterator[str]:
        """Every address of a route at this place; a new sort of address has to be added here."""
        if "kind" in route.names:
            for kind in KINDS if route.name == "say_looks_wrong" else (*KINDS, *STOCKED):
                if (route.name, kind) not in STAYS:
                    yield self.fill(route, kind=kind, pk=self.record(kind).pk)
        else:
            yield self.fill(route)

    def key_of(self, route: Route) -> int:
        keys = {"redesigns/": self.step.pk, "forecast/kept/": self.kept.pk}
        return next((key for start, key in keys.items() if route.pattern.startswith(start)), self.mark.pk)

    def fill(self, route: Route, **given: Any) -> str:
        carriage = self.carriage
        codes = {
            "sites/": self.site.code,
            "catalogue/parts": carriage.n1.code,
            "catalogue/components": carriage.nuts.code,
            "catalogue/types": carriage.type.code,
            "people/": carriage.crew.code,
            "stores/": self.store.code,
            "supply/": self.order.code,
            "bench/jobs/": self.job.code,
            "redesigns/": self.redesign.code,
            "forecast/planned-replacement/": carriage.nuts.code,
        }
        values: dict[str, Any] = {
            "tag": self.module.code,
            "code": next((code for start, code in codes.items() if route.pattern.startswith(start)), None),
            "mode": carriage.worn.code,
            "position": carriage.nut.code,
            "part": carriage.n1.code,
            "pk": self.key_of(route),
            "work_id": self.work.pk,
            "uidb64": "MQ",
            "token": "none",
            "key": uuid.uuid4(),
            **given,
        }
        path = route.pattern
        for name in route.names:
            value = values.get(name)
            assert value is not None, f"Tell tests/fleet/rights_world.py what {name} means in {route.pattern}."
            path = re.sub(rf"<(\w+:)?{name}>", str(value), path)
        return "/" + path


WHO = [f"{role}{sight}" for role in Role.values for sight in ("", " of all sites")]


def make_who(who: str, place: Place) -> Person:
    """A person of the role, on that one site or seeing all."""
    role, _, everywhere = who.partition(" of ")
    return make.make_person(role=role) if everywhere else make.make_person(role=role, sites=[place.site])
