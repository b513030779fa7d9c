"""Who may do what. Rights are held by role; what they are held on is decided by each queryset's `for_person`.

A view names its right with `@needs("…")`; `RightsMiddleware` refuses every view that names none, and hands
the view `request.seen`, the only way for views, forms and the API to reach records.
"""

from __future__ import annotations

import datetime as dt
from collections.abc import Callable
from typing import Any, TypeVar

from django.db import models
from django.utils import timezone

from fleet.models import Person, Role

PUBLIC = "public"  # sign in, reset links, the service worker: no person needed
SEE = "see"  # records of own sites
LOG = "log"  # visits, readings, findings
REPORT = "report"  # a stop, “looks wrong”
CORRECT = "correct"  # any record, any day; crews and bench correct their own of the same day
CATALOGUE = "catalogue"  # components, types, parts, sites, modules, import
BENCH = "bench"  # bench jobs and hours
STORES = "stores"  # what lies in the stores they see
ISSUE = "issue"  # parts to a visit or a job; crews only from what they carry along
STOCK = "stock"  # receipts, counts, transfers, scrap, supply orders
LIFE = "life"  # life, forecast, redesigns
CHANCES = "chances"  # the chance of failing, for modules they see
COSTS = "costs"
PEOPLE = "people"  # people, keys, book settings

EVERYBODY = frozenset(Role.values)
OFFICE = frozenset({Role.ADMINISTRATOR, Role.MANAGER, Role.PLANNER})
CHIEFS = frozenset({Role.ADMINISTRATOR, Role.MANAGER})
HOLDERS: dict[str, frozenset[str]] = {
    SEE: EVERYBODY,
    REPORT: EVERYBODY,
    LOG: OFFICE | {Role.CREW, Role.BENCH},
    CORRECT: OFFICE,
    CATALOGUE: OFFICE,
    BENCH: OFFICE | {Role.BENCH},
    STORES: OFFICE | {Role.CREW, Role.BENCH},
    ISSUE: OFFICE | {Role.CREW, Role.BENCH},
    STOCK: OFFICE,
    LIFE: OFFICE,
    CHANCES: OFFICE | {Role.CREW},
    COSTS: OFFICE | {Role.CREW, Role.BENCH},
    PEOPLE: CHIEFS,
}

View = TypeVar("View", bound=Callable[..., Any])


def may(person: Any, right: str) -> bool:
    """Whether the person's role holds the right."""
    return bool(person.is_authenticated and person.is_active and person.role in HOLDERS[right])


def may_correct(person: Person, record: Any, now: dt.datetime | None = None) -> bool:
    """Office people any record; crew and bench what they entered themselves, on the day they entered it."""
    if may(person, CORRECT):
        return True
    if not may(person, LOG) or getattr(record, "entered_by_id", None) != person.pk:
        return False
    site = getattr(record, "site", None)
    day = site.day_of if site else (lambda instant: instant.date())
    return day(record.entered_at) == day(now or timezone.now())


def may_manage(by: Person, person: Person) -> bool:
    """Change somebody or hand over their link: nobody gets at one who may do or see more than they do themselves."""
    if person.role == Role.ADMINISTRATOR and by.role != Role.ADMINISTRATOR:
        return False
    if by.all_sites or by.pk == person.pk:
        return True
    return not person.all_sites and not person.sites.exclude(pk__in=by.sites.values("pk")).exists()


def needs(right: str) -> Callable[[View], View]:
    """Names the right a view asks for; the middleware enforces it."""
    if right != PUBLIC and right not in HOLDERS:
        raise ValueError(f"{right!r} is no right. Choose one of {', '.join(HOLDERS)}.")

    def mark(view: View) -> View:
        view.right = right  # type: ignore[attr-defined]
        return view

    return mark


def seen_by(person: Person, model: type[models.Model]) -> Any:
    """The rows of a model that a person may see."""
    return model._default_manager.for_person(person)  # type: ignore[attr-defined]
