"""The settings of the whole book."""

from __future__ import annotations

from typing import Any

from fleet.actions.base import change
from fleet.actions.catalogue import Saving, only
from fleet.actions.errors import BadValue
from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.models import Book, Module, Person
from fleet.rights import PEOPLE

FIELDS = {
    "name", "currency", "zone", "bench_target", "review_period_days", "visit_cost", "stop_cost_per_day",
    "bench_hour_cost", "service_level",
}  # fmt: skip


def save_book(*, by: Person | None, version: int | None = None, **fields: Any) -> Book:
    """Another zone moves the days of every site that has none of its own, and their clocks with them."""
    only(fields, FIELDS, "book")
    with change(by=by, right=PEOPLE):
        book = Book.load()
        if "zone" in fields and fields["zone"] != book.zone:
            # Modules before the book, as everywhere.
            list(Module.objects.order_by("pk").select_for_update(of=("self",)).values_list("pk", flat=True))
        saving = Saving(Book, book, version, fields)
        stored: Book = saving.record
        if not stored.zone:
            raise BadValue("The zone is missing. Write it like Europe/Lisbon.", field="zone")
        saving.store()
        if saving.changes("zone"):
            rebuild_clocks(None)
    return stored
