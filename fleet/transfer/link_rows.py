"""Stores which sites a person sees, which types a part fits and which parts another replaces, with their history."""

from __future__ import annotations

from typing import Any

from fleet.transfer.columns import FileKind
from fleet.transfer.known import Known
from fleet.transfer.links import LINKS, book_links, through
from fleet.transfer.staging import fetch
from fleet.transfer.writing_sql import Numbers


def write_links(kind: FileKind, known: Known, numbers: Numbers) -> None:
    """For rows that are new or differ; others keep what they have."""
    links = LINKS[kind.name]
    targets: Any = {"people": known.sites, "parts": known.types, "replacements": known.parts}[kind.name]
    target_base = numbers.base.get(links.target._meta.db_table, 0)
    base = numbers.base.get(kind.table, 0)
    staged = fetch(f"SELECT id, linked FROM {kind.stage} WHERE id < 0 OR differs = 1 ORDER BY row")
    before = book_links(kind, [record for record, _ in staged if record > 0])
    fresh: list[Any] = []
    for record, linked in staged:
        final = record if record > 0 else base - record
        if record > 0 and before.get(record, "") != (linked or ""):
            through(kind).objects.filter(**{links.own_column: final}).delete()
        elif record > 0:
            continue
        for code in (linked or "").split():
            found = targets[code]
            target = found if isinstance(found, int) else found.id
            target = target if target > 0 else target_base - target
            fresh.append(through(kind)(**{links.own_column: final, links.target_column: target}))
    through(kind).objects.bulk_create(fresh, batch_size=500)
    write_link_history(kind, [record if record > 0 else base - record for record, _ in staged])


def write_link_history(kind: FileKind, records: list[int]) -> None:
    """The links as each record's newest history row found them."""
    links = LINKS[kind.name]
    historical: Any = kind.model.history.model  # type: ignore[attr-defined]
    model: Any = historical._meta.get_field(f"{historical._meta.model_name}_{links.field}").related_model
    for start in range(0, len(records), 500):
        some = records[start : start + 500]
        newest = dict(historical.objects.filter(id__in=some).order_by("history_id").values_list("id", "history_id"))
        rows = through(kind).objects.filter(**{f"{links.own_column}__in": some})
        model.objects.bulk_create(
            [
                model(**{"history_id": newest[own], links.own_column: own, links.target_column: target, "id": pk})
                for pk, own, target in rows.values_list("pk", links.own_column, links.target_column)
            ],
            batch_size=500,
        )
