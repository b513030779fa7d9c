"""The records that crews enter, by the word used in addresses: visit, fitting, finding, stop, reading, placement."""

from __future__ import annotations

from typing import Any

from django.db import models
from django.http import Http404

from fleet.models import Finding, Fitting, Module, Placement, Reading, Stop, Visit

ENTERED: dict[str, type[models.Model]] = {
    "visit": Visit,
    "fitting": Fitting,
    "finding": Finding,
    "stop": Stop,
    "reading": Reading,
    "placement": Placement,
}
DOUBTED = {**ENTERED, "module": Module}


def kind_of(record: models.Model) -> str:
    return next(kind for kind, model in DOUBTED.items() if isinstance(record, model))


def module_of(record: Any) -> Module:
    if isinstance(record, Module):
        return record
    return record.visit.module if isinstance(record, Finding) else record.module


def seen_record(request: Any, kind: str, pk: int, *, kinds: dict[str, type[models.Model]]) -> Any:
    """The record, if there is such a kind and the person may see it; 404 otherwise."""
    if kind not in kinds or not 0 < pk < 2**63:
        raise Http404
    record = request.seen(kinds[kind]).filter(pk=pk).first()
    if record is None:
        raise Http404
    return record
