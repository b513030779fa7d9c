"""Moves of stock: the ledger, and a form for each verb."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from django.contrib import messages
from django.http import HttpResponse
from django.shortcuts import get_object_or_404, redirect, render
from django.urls import reverse
from django.views.decorators.cache import never_cache

from fleet.actions.errors import ChangedCount, RecordError
from fleet.formats import counted, number
from fleet.forms.errors import add_record_error
from fleet.forms.stock_filters import MoveFilter
from fleet.forms.stores import CountForm, IssueForm, MoveForm, ReceiveForm, ScrapForm, TransferForm
from fleet.models import Part, Site, StockBalance, StockMove, Store
from fleet.models.codes import clean_code
from fleet.rights import ISSUE, STOCK, STORES, may, may_correct, needs
from fleet.views.listing import Column, Listing

JOINS = ("store", "other_store", "part", "visit__module", "job__module", "line__order", "entered_by")
ANOTHER = "another store"


def signed(quantity: int) -> str:
    return f"+{number(quantity)}" if quantity > 0 else number(quantity)


class Seen:
    """Of what a move names besides its store, that which the person may read; the rest is not named."""

    def __init__(self, request: Any) -> None:
        self.whole = request.user.all_sites and request.user.role != "bench"
        self.sites = set() if self.whole else set(request.seen(Site).values_list("pk", flat=True))
        self.stores = set() if self.whole else set(request.seen(Store).values_list("pk", flat=True))
        self.orders = may(request.user, STOCK)

    def store(self, key: int | None) -> bool:
        return key is None or self.whole or key in self.stores

    def site(self, key: int | None) -> bool:
        return self.whole or key in self.sites


def store_name(store: Store, seen: Seen) -> str:
    return str(store.title) if seen.store(store.pk) else ANOTHER


def what_for(move: Any, seen: Seen) -> Any:
    """The visit, job or order that a move belongs to."""
    if move.visit is not None:
        if not seen.site(move.visit.site_id):
            return {"text": "another site", "sub": "visit"}
        code = move.visit.module.code
        return {"text": code, "url": reverse("module", args=[code]), "sub": "visit"}
    if move.job is not None:
        if not seen.site(move.job.depot_id):
            return {"text": "another depot", "sub": "bench"}
        return {"text": move.job.module.code, "url": reverse("bench_job", args=[move.job.code]), "sub": "bench"}
    if move.line is not None and seen.orders:
        return {
            "text": move.line.order.code,
            "url": reverse("supply_order", args=[move.line.order.code]),
            "sub": "order",
        }
    return None


def part_cell(move: Any) -> dict[str, Any]:
    return {"text": move.part.code.replace("-", "\u2011"), "sub": "used" if move.condition == "used" else ""}


class MoveLines:
    """The ledger's columns; at one store, quantities are signed as that store sees them."""

    def __init__(self, request: Any, store: Store | None = None) -> None:
        self.request, self.store, self.seen = request, store, Seen(request)

    def quantity(self, move: Any) -> int:
        return int(-move.quantity if self.store is not None and move.store_id != self.store.pk else move.quantity)

    def other(self, move: Any) -> str:
        if move.other_store is None:
            return ""
        there = move.store if self.store is not None and move.store_id != self.store.pk else move.other_store
        return store_name(there, self.seen)

    def strike(self, move: Any) -> Any:
        if move.struck_out:
            return {"text": f"struck out: {move.struck_out}"}
        both = self.seen.store(move.store_id) and self.seen.store(move.other_store_id)
        if not (both and may_correct(self.request.user, move)):
            return ""
        return {"text": "Strike out", "url": reverse("strike_out_record", args=["move", move.pk])}

    def columns(self) -> list[Column]:
        return [
            Column("day", "Day", lambda m: m.happened_on, sort=("happened_on",)),
            Column("store", "Store", lambda m: store_name(m.store, self.seen),
                   plain=lambda m: m.store.code if self.seen.store(m.store_id) else ANOTHER,
                   sort=("store__code_order",)),
            Column("part", "Part", part_cell, plain=lambda m: m.part.code, sort=("part__code_order",)),
            Column("quantity", "Pieces", lambda m: signed(self.quantity(m)), plain=lambda m: m.quantity,
                   sort=("quantity",), numeric=True),
            Column("kind", "Kind", lambda m: m.kind, sort=("kind",)),
            Column("other", "Other store", self.other),
            Column("for", "For", lambda m: what_for(m, self.seen)),
            Column("condition", "Condition", lambda m: m.condition, sort=("condition",)),
            Column("reason", "Reason", lambda m: m.reason),
            Column("who", "Entered by", lambda m: m.entered_by.name if m.entered_by else "",
                   sort=("entered_by__name",)),
            Column("strike", "Wrong?", self.strike, plain=lambda m: m.struck_out),
        ]  # fmt: skip

    def shown(self) -> list[Column]:
        """On a store's own page the store is the page; a used part says so beside its number."""
        return [column for column in self.columns() if column.key not in {"store", "condition"}]

    def heads(self) -> list[dict[str, Any]]:
        return [{"label": column.label, "numeric": column.numeric} for column in self.shown()]

    def rows(self, moves: Any) -> list[dict[str, Any]]:
        return [
            {"cells": [column.cell(move) for column in self.shown()], "kind": "struck" if move.struck_out else ""}
            for move in moves
        ]


def move_lines(request: Any, store: Store | None = None) -> MoveLines:
    return MoveLines(request, store)


@needs(STORES)
def stock_moves(request: Any) -> HttpResponse:
    """Standing moves; what was struck out stays readable on its store's page and in the history."""
    listing = Listing(
        columns=move_lines(request).columns(),
        what="moves",
        caption="Moves of stock",
        sort="-day",
        empty_state="No part was moved yet.",
        empty_remedy="Receive the first ones at a store.",
    )
    rows = request.seen(StockMove).standing().select_related(*JOINS)
    crumbs = [{"name": "Stores", "url": reverse("stores")}]
    return listing.answer(request, rows, MoveFilter, title="Moves of stock", crumbs=crumbs)


def move_view(request: Any, code: str, form_class: type[MoveForm]) -> HttpResponse:
    store = get_object_or_404(request.seen(Store), code=code.upper())
    form = form_class(
        request.POST if request.method == "POST" else None, store=store, request=request, initial=asked(request, store)
    )
    if request.method == "POST" and form.is_valid():
        try:
            move = form.save_by(request.user)
        except RecordError as error:
            if isinstance(error, ChangedCount) and isinstance(form, CountForm):
                form.note_moved(error.data["on_hand"])
            add_record_error(form, error)
        else:
            messages.success(request, told(request, move, form))
            return redirect("store", code=store.code)
    context = {
        "title": form.title,
        "sub": store.title,
        "form": form,
        "submit": form.submit,
        "crumbs": [
            {"name": "Stores", "url": reverse("stores")},
            {"name": store.title, "url": reverse("store", args=[store.code])},
        ],
        "cancel_url": reverse("store", args=[store.code]),
    }
    return render(request, "list/edit.html", context, status=422 if form.is_bound else 200)


def asked(request: Any, store: Store) -> dict[str, Any]:
    """What the address names beforehand; with a count goes what the book says now."""
    part = request.seen(Part).filter(code=clean_code(request.GET.get("part", "").replace("\0", ""))).first()
    if part is None:
        return {}
    condition = "used" if request.GET.get("condition") == "used" else "new"
    balance = request.seen(StockBalance).filter(store=store, part=part, condition=condition).first()
    expected = {"expected": balance.on_hand if balance else 0, "expected_of": f"{part.code} {condition}"}
    return {"part": part.code, "condition": condition, **expected}


def told(request: Any, move: StockMove, form: MoveForm) -> str:
    balance = request.seen(StockBalance).filter(store=move.store, part=move.part, condition=move.condition).first()
    left = number(balance.on_hand) if balance else "0"
    if move.kind == "count":
        said = "it agrees" if move.quantity == 0 else f"{signed(move.quantity)} posted"
        return f"Counted {move.part.code} at {move.store.title}: {said}; {left} on hand."
    pieces = counted(abs(move.quantity), "piece")
    return f"{pieces} of {move.part.code} {form.done} {move.store.title}; {left} on hand there now."


def verb(right: str, form_class: type[MoveForm]) -> Callable[[Any, str], HttpResponse]:
    @needs(right)
    @never_cache
    def view(request: Any, code: str) -> HttpResponse:
        return move_view(request, code, form_class)

    return view


receive_stock = verb(STOCK, ReceiveForm)
issue_part = verb(ISSUE, IssueForm)
count_stock = verb(STOCK, CountForm)
transfer_stock = verb(STOCK, TransferForm)
scrap_stock = verb(STOCK, ScrapForm)
