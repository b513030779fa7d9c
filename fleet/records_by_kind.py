"""The records that crews enter, by the word used in addresses: visit, fitting, finding, stop, reading, placement."""

from __future__ import annotations

from typing import Any

from django.db import models
from django.db.models import Q
from django.http import Http404
from django.urls import reverse

from fleet.models import (
    BenchHours,
    BenchJob,
    Finding,
    Fitting,
    Module,
    Placement,
    Reading,
    StockMove,
    Stop,
    Store,
    Visit,
)

ENTERED: dict[str, type[models.Model]] = {
    "visit": Visit,
    "fitting": Fitting,
    "finding": Finding,
    "stop": Stop,
    "reading": Reading,
    "placement": Placement,
}
DOUBTED = {**ENTERED, "module": Module}
# Of stores and the bench: corrected and struck out the same way, on pages of their own.
STOCKED: dict[str, type[models.Model]] = {"move": StockMove, "job": BenchJob, "hours": BenchHours}
CORRECTED = {**ENTERED, **STOCKED}


def kind_of(record: models.Model) -> str:
    return next(kind for kind, model in DOUBTED.items() if isinstance(record, model))


def module_of(record: Any) -> Module:
    if isinstance(record, Module):
        return record
    return record.visit.module if isinstance(record, Finding) else record.module


def home_of(record: Any) -> tuple[str, str]:
    """The words and the address of the page that a record is shown on."""
    if isinstance(record, StockMove):
        return record.store.title, reverse("store", args=[record.store.code])
    if isinstance(record, BenchJob | BenchHours):
        job = record.job if isinstance(record, BenchHours) else record
        return f"{job.module.code} on the bench", reverse("bench_job", args=[job.code])
    module = module_of(record)
    return module.code, reverse("module", args=[module.code])


def seen_record(request: Any, kind: str, pk: int, *, kinds: dict[str, type[models.Model]]) -> Any:
    """The record, if there is such a kind and the person may see it; 404 otherwise."""
    if kind not in kinds or not 0 < pk < 2**63:
        raise Http404
    rows = request.seen(kinds[kind]).filter(pk=pk)
    if kind == "move":  # one is seen at either end, but what it did is undone at both
        stores = request.seen(Store).values("pk")
        rows = rows.filter(Q(other_store=None) | Q(other_store__in=stores), store__in=stores)
    record = rows.first()
    if record is None:
        raise Http404
    return record
