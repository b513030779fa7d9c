"""Makes the derived clock rows again from the records, and the site of visits, stops and readings with them."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Callable, Iterable, Iterator
from itertools import islice
from typing import Any

from django.db import connection, models, transaction

from fleet.clock_records import Misplaced, load_records
from fleet.clocks import Knot, SpanClock, clocks_of
from fleet.models import ClockPoint, FittingClock, Module

MODULES_AT_ONCE = 400
ROWS_AT_ONCE = 1000


def rebuild_clocks(modules: Iterable[int] | None = None) -> None:
    """Rebuilds the clocks of these modules (primary keys), or of all; writes only rows that changed.

    Last in an action's transaction. For all modules each batch is a transaction of its own.
    """
    chosen = Module.objects.order_by("pk").values_list("pk", flat=True) if modules is None else sorted(set(modules))
    for batch in _batches(chosen, MODULES_AT_ONCE):
        with transaction.atomic():
            _lock(batch)
            _rebuild(batch)


def _batches(keys: Iterable[int], size: int) -> Iterator[list[int]]:
    rest = iter(list(keys))
    while batch := list(islice(rest, size)):
        yield batch


def _lock(batch: list[int]) -> None:
    """Two rebuilds of one module at a time would both add its knots."""
    if connection.features.has_select_for_update:
        rows = Module.objects.filter(pk__in=batch).order_by("pk").select_for_update(no_key=True)
        list(rows.values_list("pk", flat=True))


def _rebuild(batch: list[int]) -> None:
    knots: dict[Any, tuple[Any, ...]] = {}
    spans: dict[Any, tuple[Any, ...]] = {}
    misplaced: list[Misplaced] = []
    for loaded in load_records(batch):
        clocks = clocks_of(loaded.record)
        module = loaded.record.module
        knots.update({(module, knot.day): (module, *knot) for knot in clocks.knots})
        spans.update({span.fitting_id: span for span in clocks.spans})
        misplaced += loaded.misplaced
    _write(ClockPoint, batch, ["module_id", *Knot._fields], knots, lambda row: (row[0], row[1]))
    _write(FittingClock, batch, list(SpanClock._fields), spans, lambda row: row[0])
    _move_to_their_sites(misplaced)


def _write(
    model: type[models.Model],
    batch: list[int],
    columns: list[str],
    rows: dict[Any, tuple[Any, ...]],
    key_of: Callable[[tuple[Any, ...]], Any],
) -> None:
    """Leaves exactly these rows for the modules of the batch; equal ones are not touched."""
    wanted = dict(rows)
    stale: list[int] = []
    for pk, *present in model._default_manager.filter(module__in=batch).values_list("pk", *columns):
        row = tuple(present)
        key = key_of(row)
        if wanted.get(key) == row:
            del wanted[key]
        else:
            stale.append(pk)
    for keys in _batches(stale, ROWS_AT_ONCE):
        model._default_manager.filter(pk__in=keys).delete()
    _insert(model, columns, list(wanted.values()))


def _insert(model: type[models.Model], columns: list[str], rows: list[tuple[Any, ...]]) -> None:
    """Straight into the table: building an object a row would take most of an import's time."""
    if not rows:
        return
    quote = connection.ops.quote_name
    names = ", ".join(quote(column) for column in columns)
    table = f"{quote(model._meta.db_table)} ({names})"
    with connection.cursor() as cursor:
        if connection.vendor == "postgresql":
            with cursor.copy(f"COPY {table} FROM STDIN") as copy:
                for row in rows:
                    copy.write_row(row)
        else:
            places = ", ".join(["%s"] * len(columns))
            cursor.executemany(f"INSERT INTO {table} VALUES ({places})", rows)


def _move_to_their_sites(misplaced: list[Misplaced]) -> None:
    places: dict[tuple[type[models.Model], int | None], list[int]] = defaultdict(list)
    for row in misplaced:
        places[row.model, row.site].append(row.pk)
    for (model, site), all_keys in places.items():
        for keys in _batches(all_keys, ROWS_AT_ONCE):
            model._default_manager.filter(pk__in=keys).update(site=site)  # no history: derived
