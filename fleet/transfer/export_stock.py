"""The rows of stores.csv, supply.csv, moves.csv, bench.csv, hours.csv and capacity.csv."""

from __future__ import annotations

from typing import Any

from django.db.models import Case, F, When

from fleet.transfer.plain_rows import Rows, plain
from fleet.transfer.scope import Scope


def stores(scope: Scope) -> Rows:
    site: Any = "site__code"
    if scope.sites is not None:
        site = Case(When(site__in=scope.sites, then=F("site__code")))
    query = scope.stores().order_by("code_order")
    yield from plain(query, "code", "name", site, "person__code", "may_go_below_zero")


def supply(scope: Scope) -> Rows:
    for *row, cost in plain(
        scope.supply().order_by("order__code_order", "part__code_order", "pk"), "order__code", "part__code", "quantity",
        "order__ordered_on", "due_on", "order__supplier", "unit_cost",
    ):  # fmt: skip
        yield *row, cost if scope.costs else None


def moves(scope: Scope) -> Rows:
    """In the order in which they happened, so that a reader can follow each shelf."""
    visit = Case(When(visit__in=scope.visits().values("pk"), then=F("visit__code")))
    job = Case(When(job__in=scope.jobs().values("pk"), then=F("job__code")))
    order = Case(When(line__in=scope.supply().values("pk"), then=F("line__order__code")))
    yield from plain(
        scope.moves().order_by("happened_on", "pk"), "code", "store__code", "part__code", "happened_on", "quantity",
        "kind", "other_store__code", visit, job, order, "condition", "reason",
    )  # fmt: skip


def bench(scope: Scope) -> Rows:
    yield from plain(
        scope.jobs().order_by("received_on", "code_order"), "code", "module__code", "depot__code", "reason",
        "received_on", "stage", "started_on", "finished_on", "outcome", "waits_for__code",
        "note",
    )  # fmt: skip


def hours(scope: Scope) -> Rows:
    query = scope.hours().order_by("day", "job__code_order", "person__code_order", "pk")
    yield from plain(query, "job__code", "person__code", "day", "hours")


def capacity(scope: Scope) -> Rows:
    yield from plain(scope.capacity().order_by("week"), "week", "hours")
