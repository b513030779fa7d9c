"""Which spares lie where and how fast each place uses them, as the question where to keep them takes it.

All depots are one, and what crews carry along counts as lying there: it serves several sites. Use a day at each site
is the forecast's over its weeks; a part's lead time is what past orders taught. A stock level is what lies there and
is due.
"""

from __future__ import annotations

import datetime as dt
from collections import defaultdict
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

from django.utils import timezone

from fleet.models import Book, Component, Part, SiteKind, StockBalance, Store
from reliability.forecasts.coming_use import WEEK, ComingUse, kept_uses
from reliability.forecasts.order_list import lead_times
from reliability.forecasts.place_words import sentences
from reliability.forecasts.shelves import shelves
from reliability.forecasts.stock_places import PlacedPart, StockPlaces, level_spread_of, stock_places
from reliability.kept import kept

DEPOT = "the depot"
LEAST_USE = 1e-5  # pieces a day: less is no use worth a spare


@dataclass(frozen=True)
class PlaceQuestion:
    """budget: money to spend on spares; ship_days: from the depot to a site; everywhere: also sites without a store."""

    budget: float
    ship_days: float
    everywhere: bool = False


@dataclass(frozen=True)
class Placed:
    """parts: what can be told of; left_out: parts without a price or whose use is not known."""

    parts: list[PlacedPart]
    sites: list[str]
    stores: list[str]
    without_price: list[str] = field(default_factory=list)
    unknown: list[str] = field(default_factory=list)


def places_document(question: PlaceQuestion) -> dict[str, Any]:
    """The curve of money against modules that wait, with sentences; kept while stores, use and question stay."""
    uses = kept_uses(Component.objects.all(), count=True)
    found = placed(uses, timezone.localdate())
    if not found.parts:
        return {"refused": why_nothing(found)}
    currency = Book.load().currency
    asked = {
        "question": [question.budget, question.ship_days, question.everywhere, currency],
        "parts": [[part.part, part.name, part.unit_cost, part.supplier_days, part.level_spread, part.at_depot,
                   sorted((part.at_sites or {}).items()), sorted(part.use_a_day.items())] for part in found.parts],
        "stores": found.stores,
    }  # fmt: skip
    document: dict[str, Any] = kept("stock places", asked, lambda: told(question, found, currency))
    return document


def told(question: PlaceQuestion, found: Placed, currency: str) -> dict[str, Any]:
    ship = dict.fromkeys(found.sites, question.ship_days)
    keeping = None if question.everywhere else found.stores
    answer: StockPlaces = stock_places(found.parts, ship, question.budget, depot=DEPOT, stores=keeping)
    return {
        **answer.document(),
        "currency": currency,
        "only_the_way": only_the_way(found, question),
        "sentences": sentences(answer, currency),
        "names": {part.part: part.name for part in found.parts},
        "stores": found.stores,
        "without_price": found.without_price,
        "unknown": found.unknown,
        "kept": [
            {
                "part": part.part,
                "depot": part.at_depot,
                "sites": part.at_sites or {},
                "use_a_year": 365.0 * sum(part.use_a_day.values()),
            }
            for part in found.parts
        ],
    }


def only_the_way(found: Placed, question: PlaceQuestion) -> float:
    """Modules that wait on average while a part comes from the depot to a site that keeps none: no stock spares it."""
    keeping = set(found.sites) if question.everywhere else set(found.stores)
    return question.ship_days * sum(
        a_day for part in found.parts for site, a_day in part.use_a_day.items() if site not in keeping
    )


def placed(uses: Mapping[str, ComingUse], today: dt.date) -> Placed:
    """Parts in use with a price, and what lies of each at the depots and at sites."""
    known = {part: use for use in uses.values() if use.known for part in use.used}
    lying = stock_by_place()
    listed = shelves(today, known)
    parts, without_price = [], []
    sites: set[str] = set()
    for shelf in listed:
        use = known.get(shelf.part)
        if use is None:
            continue
        days = len(use.weekly) * WEEK
        a_day = {site: pieces / days for site, pieces in use.use_at_sites(shelf.part).items()}
        if sum(a_day.values()) < LEAST_USE:
            continue
        if not shelf.unit_cost:
            without_price.append(shelf.part)
            continue
        here = lying.get(shelf.part, {})
        due = sum(each.quantity for each in shelf.due)
        parts.append(
            PlacedPart(
                part=shelf.part,
                name=shelf.name or shelf.part,
                unit_cost=float(shelf.unit_cost),
                use_a_day=a_day,
                supplier_days=lead_times(shelf, today).mean,
                level_spread=level_spread_of(use.used[shelf.part]),
                at_depot=max(here.get("", 0) + due, 0),
                at_sites={site: max(pieces, 0) for site, pieces in here.items() if site and site in a_day},
            )
        )
        sites |= set(a_day)
    stores = sorted(site_stores() & sites)
    unknown = sorted(code for code, use in uses.items() if not use.known)
    return Placed(parts, sorted(sites), stores, without_price, unknown)


def stock_by_place() -> dict[str, dict[str, int]]:
    """On hand by part and site; depots, vans and shelves without a site together under ''."""
    found: dict[str, dict[str, int]] = defaultdict(lambda: defaultdict(int))
    rows = StockBalance.objects.exclude(on_hand=0).values_list(
        "part__code", "store__site__code", "store__site__kind", "store__person", "on_hand"
    )
    for part, site, kind, person, pieces in rows:
        at_site = site is not None and kind != SiteKind.DEPOT and person is None
        found[part][site if at_site else ""] += pieces
    return found


def site_stores() -> set[str]:
    rows = Store.objects.filter(person=None, site__isnull=False).exclude(site__kind=SiteKind.DEPOT)
    return set(rows.values_list("site__code", flat=True))


def why_nothing(found: Placed) -> str:
    if found.without_price:
        return f"{', '.join(found.without_price)} have no price, so money cannot be weighed. Enter their unit cost."
    if not Part.objects.exists():
        return "No part is in the catalogue yet. Add components and parts first."
    return "Nothing is expected to be used, as far as the records tell, so there is nothing to keep."
