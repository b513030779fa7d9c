"""Plain makers of records for tests: sensible by default, each with the actions' own history."""

from __future__ import annotations

import datetime as dt
from itertools import count
from typing import Any

from fleet.models import (
    Book,
    Clock,
    Component,
    FailureMode,
    Fitting,
    Module,
    ModuleType,
    Part,
    Person,
    Placement,
    Position,
    Role,
    Site,
    SiteKind,
    StockMove,
    Store,
)

_numbers = count(1)
LONG_AGO = dt.date(2020, 1, 6)


def number() -> int:
    return next(_numbers)


def at(day: str, time: str = "09:00") -> dt.datetime:
    """An instant in UTC: `at("2026-03-09")` is nine in the morning."""
    return dt.datetime.fromisoformat(f"{day}T{time}:00+00:00")


def on(day: str) -> dt.date:
    return dt.date.fromisoformat(day)


def make_person(**fields: Any) -> Person:
    """`sites` may be a list; without one the person sees all sites."""
    sites = fields.pop("sites", None)
    fields.setdefault("code", f"P-{number()}")
    fields.setdefault("name", fields["code"].title())
    fields.setdefault("role", Role.MANAGER)
    fields.setdefault("all_sites", sites is None)
    person = Person.objects.create_user(**fields)
    if sites:
        person.sites.set(sites)
    return person


def make_manager(**fields: Any) -> Person:
    return make_person(**{"role": Role.MANAGER, **fields})


def make_planner(**fields: Any) -> Person:
    return make_person(**{"role": Role.PLANNER, **fields})


def make_crew(*sites: Site, **fields: Any) -> Person:
    return make_person(**{"role": Role.CREW, "sites": list(sites), **fields})


def make_bench(*sites: Site, **fields: Any) -> Person:
    return make_person(**{"role": Role.BENCH, "sites": list(sites), **fields})


def make_contact(*sites: Site, **fields: Any) -> Person:
    return make_person(**{"role": Role.CONTACT, "sites": list(sites), **fields})


def make_book(**fields: Any) -> Book:
    book = Book.load()
    for name, value in fields.items():
        setattr(book, name, value)
    book.save()
    return book


def make_site(**fields: Any) -> Site:
    fields.setdefault("code", f"SITE-{number()}")
    fields.setdefault("kind", SiteKind.FIELD)
    return Site.objects.create(**fields)


def make_depot(**fields: Any) -> Site:
    return make_site(**{"kind": SiteKind.DEPOT, **fields})


def make_component(**fields: Any) -> Component:
    fields.setdefault("code", f"COMP-{number()}")
    fields.setdefault("clock", Clock.STROKES)
    return Component.objects.create(**fields)


def make_mode(**fields: Any) -> FailureMode:
    fields.setdefault("code", f"MODE-{number()}")
    if "component" not in fields:
        fields["component"] = make_component()
    return FailureMode.objects.create(**fields)


def make_type(**fields: Any) -> ModuleType:
    fields.setdefault("code", f"TYPE-{number()}")
    return ModuleType.objects.create(**fields)


def make_position(**fields: Any) -> Position:
    fields.setdefault("code", f"POS-{number()}")
    if "type" not in fields:
        fields["type"] = make_type()
    if "component" not in fields:
        fields["component"] = make_component()
    return Position.objects.create(**fields)


def make_part(**fields: Any) -> Part:
    fits_types = fields.pop("fits_types", ())
    fields.setdefault("code", f"PART-{number()}")
    if "component" not in fields:
        fields["component"] = make_component()
    part = Part.objects.create(**fields)
    part.fits_types.set(fits_types)
    return part


def make_module(**fields: Any) -> Module:
    """`site` places the module there from `from_on` (long ago, unless said)."""
    site, bay = fields.pop("site", None), fields.pop("bay", "")
    from_on = fields.pop("from_on", LONG_AGO)
    fields.setdefault("code", f"M-{number()}")
    if "type" not in fields:
        fields["type"] = make_type()
    module = Module.objects.create(**fields)
    if site is not None:
        make_placement(module=module, site=site, bay=bay, from_on=from_on)
    return module


def make_placement(**fields: Any) -> Placement:
    fields.setdefault("from_on", LONG_AGO)
    return Placement.objects.create(**fields)


def make_fitting(**fields: Any) -> Fitting:
    """A part that was already in: stored as it is, without the action's checks."""
    fields.setdefault("code", f"F-{number()}")
    fields.setdefault("fitted_on", LONG_AGO)
    return Fitting.objects.create(**fields)


def make_store(**fields: Any) -> Store:
    fields.setdefault("code", f"STORE-{number()}")
    return Store.objects.create(**fields)


def stock(store: Store, part: Part, quantity: int, **fields: Any) -> StockMove:
    """So many lie there: received by the action, without an order."""
    from fleet.actions.receive_stock import receive_stock

    fields.setdefault("happened_on", LONG_AGO)
    return receive_stock(by=None, store=store, part=part, quantity=quantity, **fields)


class Carriage:
    """One module with a nut and a screw, at a site, and the people around it: the usual small world of a test."""

    def __init__(self, **fields: Any) -> None:
        self.site = fields.pop("site", None) or make_site(code=f"WEIR-{number()}", zone="Europe/Lisbon")
        self.nuts = make_component(clock=Clock.STROKES)
        self.screws = make_component(clock=Clock.DAYS)
        self.worn = make_mode(component=self.nuts, name="thread worn out")
        self.bowed = make_mode(component=self.screws, name="screw bowed")
        self.type = make_type()
        self.nut = make_position(type=self.type, code="NUT", component=self.nuts, order=1)
        self.screw = make_position(type=self.type, code="SCREW", component=self.screws, order=2)
        self.n1 = make_part(component=self.nuts)
        self.n2 = make_part(component=self.nuts, supersedes=self.n1)
        self.s1 = make_part(component=self.screws)
        self.module = make_module(type=self.type, site=self.site, **fields)
        self.manager = make_manager()
        self.crew = make_crew(self.site)
        self.contact = make_contact(self.site)

    def fit(self, part: Part | None = None, fitted_on: str = "2024-01-10", **fields: Any) -> Fitting:
        """A nut (or another part) that went in by the action."""
        from fleet.actions.fit_part import fit_part

        part = part or self.n1
        position = fields.pop("position", self.nut if part.component_id == self.nuts.pk else self.screw)
        return fit_part(
            by=self.manager, module=self.module, position=position, part=part, fitted_on=on(fitted_on), **fields
        )
