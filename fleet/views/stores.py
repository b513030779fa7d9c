"""Stores: what lies where, one store with its shelf, its form."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Sequence
from decimal import Decimal
from typing import Any

from django.db.models import BooleanField, Prefetch, Value
from django.http import HttpResponse
from django.shortcuts import get_object_or_404, render
from django.urls import reverse
from django.utils import timezone

from fleet.formats import FIXED, counted, number
from fleet.forms.stock_filters import SeenStockFilter, StockFilter
from fleet.forms.stores import StoreForm
from fleet.models import Book, Part, SiteKind, StockBalance, StockMove, Store, SupplyLine
from fleet.rights import CATALOGUE, COSTS, ISSUE, LIFE, STOCK, STORES, may, needs
from fleet.stock import kept_parts, sees_all_stock, with_stock
from fleet.views.listing import Column, Listing
from fleet.views.saving import save_form
from fleet.views.stock_moves import JOINS, move_lines

CRUMBS = [{"name": "Stores", "url": "/stores/"}]
LATEST = 15
NOTHING = "Nothing lies in a store of yours yet."


def moves_of(part: Any) -> dict[str, Any]:
    return {"text": part.code, "url": f"{reverse('stock_moves')}?part={part.code}", "sub": part.name}


def on_hand_cell(part: Any) -> dict[str, Any]:
    short = part.on_hand < 0 or (part.whole and part.on_hand < part.minimum)
    return {
        "text": number(part.on_hand),
        "kind": "late" if short else "",
        "sub": f"{part.used} used" if part.used else "",
    }


def by_store(part: Any) -> dict[Any, int]:
    found: dict[Any, int] = defaultdict(int)
    for balance in part.here:
        found[balance.store] += balance.on_hand
    return {store: count for store, count in found.items() if count}


def where(part: Any) -> str:
    """Depots by name, the rest together: `North depot shelf 52 · at sites 21 · carried 26`."""
    named, at_sites, carried = [], 0, 0
    for store, count in by_store(part).items():
        if store.person_id is not None:
            carried += count
        elif store.site is not None and store.site.kind != SiteKind.DEPOT:
            at_sites += count
        else:
            named.append((store.title, count))
    rest = [(words, count) for words, count in (("at sites", at_sites), ("carried", carried)) if count]
    # A line breaks between two places, not within one.
    return " · ".join(f"{words} {number(count)}".replace(" ", FIXED) for words, count in [*named, *rest])


def where_in_file(part: Any) -> str:
    return " ".join(f"{store.code}:{count}" for store, count in by_store(part).items())


def due_cell(part: Any) -> dict[str, Any]:
    return {"text": number(part.due) if part.due else "–"}


def next_cell(part: Any) -> Any:
    late = part.next_due is not None and part.next_due < timezone.localdate()
    return {"text": part.next_due, "kind": "late", "sub": "overdue"} if late else part.next_due


PART = Column("part", "Part", moves_of, plain=lambda part: part.code, sort=("code_order",))
ON_HAND = Column("on_hand", "On hand", on_hand_cell, plain=lambda part: part.on_hand, sort=("on_hand",), numeric=True)
WHERE = Column("where", "Where", where, plain=where_in_file)
DUE = [
    Column("due", "Due", due_cell, plain=lambda part: part.due, sort=("due",), numeric=True),
    Column("next_due", "Next delivery", next_cell, plain=lambda part: part.next_due, sort=("next_due",), numeric=True),
]
LIMITS = [
    Column("minimum", "Minimum", lambda part: part.minimum, sort=("minimum",), numeric=True),
    Column(
        "missing",
        "Below it by",
        lambda part: {"text": number(part.missing), "kind": "late"} if part.missing else "–",
        plain=lambda part: part.missing,
        sort=("missing",),
        numeric=True,
    ),
]


def stock_list(*, orders: bool, whole: bool, more: Sequence[Column] = ()) -> Listing:
    """What is short comes first, for those who see all of it; `more` columns may tell what is forecast."""
    return Listing(
        columns=[PART, ON_HAND, *more, WHERE, *(DUE if orders else []), *(LIMITS if whole else [])],
        what="parts",
        caption="Stock",
        sort="-missing" if whole else "part",
        template="stores/page.html",
        empty_state="No part lies in a store of yours.",
        empty_remedy="A planner or manager receives the first ones, or brings in stores.csv and moves.csv.",
    )


@needs(STORES)
def stores(request: Any) -> HttpResponse:
    return stock_page(request)


def stock_page(request: Any, more: Sequence[Column] = (), **told: Any) -> Any:
    balances = request.seen(StockBalance)
    shelves = Prefetch(
        "balances", queryset=balances.select_related("store__site").order_by("store__code_order"), to_attr="here"
    )
    parts = with_stock(request.seen(Part), balances, request.seen(SupplyLine)).prefetch_related(shelves)
    whole = sees_all_stock(request.user)
    parts = parts.annotate(whole=Value(whole, output_field=BooleanField()))
    context = {
        "title": "Stores",
        "stores": request.seen(Store).order_by("code_order"),
        "lead": stock_sentence(parts, whole=whole),
        "actions": stock_actions(request),
    }
    listing = stock_list(orders=may(request.user, STOCK), whole=whole, more=more)
    return listing.answer(request, parts, StockFilter if whole else SeenStockFilter, **context, **told)


def stock_sentence(parts: Any, *, whole: bool) -> str:
    if not whole:
        held = parts.filter(on_hand__gt=0).count()
        return f"{counted(held, 'part lies', 'parts lie')} in the stores that you see." if held else NOTHING
    kept = kept_parts(parts)
    short = list(kept.filter(missing__gt=0).order_by("-missing", "code_order").values_list("code", flat=True))
    count = len(short)
    if not count:
        return "Every part lies at its minimum or above." if kept.exists() else NOTHING
    more = f" and {number(count - 3)} more" if count > 3 else ""
    return f"{counted(count, 'part lies', 'parts lie')} below the minimum: {', '.join(short[:3])}{more}."


def stock_actions(request: Any) -> list[dict[str, Any]]:
    moves = {"name": "All moves", "url": reverse("stock_moves"), "quiet": True}
    if not may(request.user, STOCK):
        return [moves]
    return [
        {"name": "What to order", "url": reverse("order_list")},
        {"name": "Order parts", "url": reverse("new_supply_order"), "quiet": True},
        {"name": "Supply orders", "url": reverse("supply"), "quiet": True},
        {"name": "Where to keep spares", "url": reverse("places"), "quiet": True},
        {"name": "Add a store", "url": reverse("new_store"), "quiet": True},
        moves,
    ]


@needs(STORES)
def store(request: Any, code: str) -> HttpResponse:
    place = get_object_or_404(request.seen(Store).select_related("site", "person"), code=code.upper())
    balances = list(
        request.seen(StockBalance)
        .filter(store=place)
        .exclude(on_hand=0, counted_on=None)
        .select_related("part")
        .order_by("part__code_order", "condition")
    )
    moves = request.seen(StockMove).at(place).select_related(*JOINS).order_by("-happened_on", "-id")[:LATEST]
    context = {
        "store": place,
        "lead": store_sentence(request, balances),
        "columns": shelf_columns(),
        "rows": [shelf_row(request, place, balance) for balance in balances],
        "move_columns": move_lines(request, place).heads(),
        "move_rows": move_lines(request, place).rows(moves),
        "moves_url": f"{reverse('stock_moves')}?store={place.code}",
        "actions": store_actions(request, place),
        "with_cover": bool(balances) and may(request.user, LIFE),
        "crumbs": CRUMBS,
    }
    return render(request, "stores/store.html", context)


def shelf_columns() -> list[dict[str, Any]]:
    return [
        {"label": "Part"},
        {"label": "Condition"},
        {"label": "On hand", "numeric": True},
        {"label": "Last counted", "numeric": True},
        {"label": "Count", "unseen": True},
    ]


def shelf_row(request: Any, place: Store, balance: Any) -> list[Any]:
    count: Any = ""
    if may(request.user, STOCK):
        address = reverse("count_stock", args=[place.code])
        count = {"text": "Count", "url": f"{address}?part={balance.part.code}&condition={balance.condition}"}
    kind = "late" if balance.on_hand < 0 else ""
    on_hand = {"text": number(balance.on_hand), "kind": kind}
    return [moves_of(balance.part), balance.condition, on_hand, balance.counted_on, count]


def store_sentence(request: Any, balances: list[Any]) -> str:
    held = [balance for balance in balances if balance.on_hand > 0]
    below = [balance.part.code for balance in balances if balance.on_hand < 0]
    pieces = sum(balance.on_hand for balance in held)
    if not held and not below:
        return "Nothing lies here."
    said = f"{counted(pieces, 'piece')} of {counted(len({b.part_id for b in held}), 'part')} lie here"
    if may(request.user, COSTS):
        worth = sum((b.on_hand * b.part.unit_cost for b in held if b.part.unit_cost is not None), Decimal(0))
        said += f", worth {number(worth, 0)} {Book.load().currency}" if worth else ""
    owed = f" Below zero: {', '.join(below)}." if below else ""
    return f"{said}.{owed}"


def store_actions(request: Any, place: Store) -> list[dict[str, Any]]:
    def do(name: str, url_name: str, *, quiet: bool = True) -> dict[str, Any]:
        return {"name": name, "url": reverse(url_name, args=[place.code]), "quiet": quiet}

    if may(request.user, STOCK):
        verbs = [do("Issue", "issue_part", quiet=False), do("Receive", "receive_stock"), do("Count", "count_stock"),
                 do("Transfer", "transfer_stock"), do("Scrap", "scrap_stock")]  # fmt: skip
        return [*verbs, do("Change the store", "edit_store")]
    own = place.person_id == request.user.pk or request.user.role == "bench"
    return [do("Issue", "issue_part", quiet=False)] if own and may(request.user, ISSUE) else []


@needs(CATALOGUE)
def new_store(request: Any) -> HttpResponse:
    return save_form(request, StoreForm, None, title="A new store", back="store", crumbs=CRUMBS)


@needs(CATALOGUE)
def edit_store(request: Any, code: str) -> HttpResponse:
    place = get_object_or_404(request.seen(Store), code=code.upper())
    crumbs = [*CRUMBS, {"name": place.title, "url": reverse("store", args=[place.code])}]
    return save_form(request, StoreForm, place, title=f"Change {place.title}", back="store", crumbs=crumbs)
