"""Makes the derived clock rows again from the records, and the site of visits, stops and readings with them."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Iterator
from dataclasses import fields
from itertools import islice
from typing import Any

from django.db import connection, models, transaction

from fleet.clock_records import Loaded, Misplaced, load_records
from fleet.clocks import Knot, SpanClock, clocks_of
from fleet.models import ClockPoint, FittingClock, Module

MODULES_AT_ONCE = 400
ROWS_AT_ONCE = 1000
KNOT_COLUMNS = [column.name for column in fields(Knot)]
SPAN_COLUMNS = [column.name for column in fields(SpanClock)]


def rebuild_clocks(modules: Iterable[int] | None = None) -> None:
    """Rebuilds the clocks of these modules (primary keys), or of all; writes only rows that changed.

    Last in an action's transaction. For all modules each batch is a transaction of its own.
    """
    chosen = Module.objects.order_by("pk").values_list("pk", flat=True) if modules is None else sorted(set(modules))
    for batch in _batches(chosen):
        with transaction.atomic():
            _lock(batch)
            _rebuild(batch)


def _batches(keys: Iterable[int]) -> Iterator[list[int]]:
    rest = iter(list(keys))
    while batch := list(islice(rest, MODULES_AT_ONCE)):
        yield batch


def _lock(batch: list[int]) -> None:
    """Two rebuilds of one module at a time would both add its knots."""
    if connection.features.has_select_for_update:
        list(Module.objects.filter(pk__in=batch).order_by("pk").select_for_update().values_list("pk", flat=True))


def _rebuild(batch: list[int]) -> None:
    knots: dict[tuple[int, float], tuple[Any, ...]] = {}
    spans: dict[int, tuple[Any, ...]] = {}
    misplaced: list[Misplaced] = []
    for loaded in load_records(batch):
        _collect(loaded, knots, spans)
        misplaced += loaded.misplaced
    _write_knots(batch, knots)
    _write_spans(batch, spans)
    _move_to_their_sites(misplaced)


def _collect(
    loaded: Loaded, knots: dict[tuple[int, float], tuple[Any, ...]], spans: dict[int, tuple[Any, ...]]
) -> None:
    clocks = clocks_of(loaded.record)
    module = loaded.record.module
    for knot in clocks.knots:
        knots[module, knot.day] = _columns(knot, KNOT_COLUMNS)
    for span in clocks.spans:
        spans[span.fitting_id] = _columns(span, SPAN_COLUMNS)


def _columns(row: Knot | SpanClock, names: list[str]) -> tuple[Any, ...]:
    return tuple([getattr(row, name) for name in names])


def _write_knots(batch: list[int], knots: dict[tuple[int, float], tuple[Any, ...]]) -> None:
    wanted = dict(knots)
    stale: list[int] = []
    present = ClockPoint.objects.filter(module__in=batch).values_list("pk", "module_id", *KNOT_COLUMNS)
    for pk, module, *columns in present:
        place = (module, columns[0])
        if wanted.get(place) == tuple(columns):
            del wanted[place]
        else:
            stale.append(pk)
    _delete(ClockPoint, stale)
    fresh = [
        ClockPoint(module_id=module, **dict(zip(KNOT_COLUMNS, columns, strict=True)))
        for (module, _), columns in wanted.items()
    ]
    ClockPoint.objects.bulk_create(fresh, batch_size=ROWS_AT_ONCE)  # no history: derived


def _write_spans(batch: list[int], spans: dict[int, tuple[Any, ...]]) -> None:
    wanted = dict(spans)
    stale: list[int] = []
    for columns in FittingClock.objects.filter(module__in=batch).values_list(*SPAN_COLUMNS):
        fitting = columns[0]
        if wanted.get(fitting) == tuple(columns):
            del wanted[fitting]
        else:
            stale.append(fitting)
    _delete(FittingClock, stale)
    fresh = [FittingClock(**dict(zip(SPAN_COLUMNS, columns, strict=True))) for columns in wanted.values()]
    FittingClock.objects.bulk_create(fresh, batch_size=ROWS_AT_ONCE)  # no history: derived


def _delete(model: type[models.Model], keys: list[int]) -> None:
    for start in range(0, len(keys), ROWS_AT_ONCE):
        model._default_manager.filter(pk__in=keys[start : start + ROWS_AT_ONCE]).delete()


def _move_to_their_sites(misplaced: list[Misplaced]) -> None:
    places: dict[tuple[type[models.Model], int | None], list[int]] = defaultdict(list)
    for row in misplaced:
        places[row.model, row.site].append(row.pk)
    for (model, site), keys in places.items():
        for start in range(0, len(keys), ROWS_AT_ONCE):
            chosen = model._default_manager.filter(pk__in=keys[start : start + ROWS_AT_ONCE])
            chosen.update(site=site)  # no history: derived
