"""Records that name several others: the sites of a person, the module types of a part, the parts replaced."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

from django.db import models

from fleet.models import ModuleType, Part, Site
from fleet.transfer.columns import FileKind
from fleet.transfer.staging import fetch


@dataclass(frozen=True)
class Links:
    """`linked` in the staging table holds the codes with spaces between, sorted."""

    field: str
    target: type[models.Model]
    own_column: str
    target_column: str


LINKS = {
    "people": Links("sites", Site, "person_id", "site_id"),
    "parts": Links("fits_types", ModuleType, "part_id", "moduletype_id"),
    "replacements": Links("replaces", Part, "redesignchange_id", "part_id"),
}


def through(kind: FileKind) -> Any:
    return kind.model._meta.get_field(LINKS[kind.name].field).remote_field.through  # type: ignore[union-attr]


def book_links(kind: FileKind, records: list[int]) -> dict[int, str]:
    """What the book says, in the form of the staging table."""
    links = LINKS[kind.name]
    codes: dict[int, list[str]] = {}
    for start in range(0, len(records), 500):
        rows = through(kind).objects.filter(**{f"{links.own_column}__in": records[start : start + 500]})
        target = links.target_column.removesuffix("_id")
        for record, code in rows.values_list(links.own_column, f"{target}__code"):
            codes.setdefault(record, []).append(code)
    return {record: " ".join(sorted(each)) for record, each in codes.items()}


def differing_links(kind: FileKind) -> Iterator[tuple[int, str, str]]:
    staged = fetch(f"SELECT row, id, linked FROM {kind.stage} WHERE id > 0 AND bad = 0 ORDER BY row")
    book = book_links(kind, [record for _, record, _ in staged])
    for row, record, linked in staged:
        if (linked or "") != book.get(record, ""):
            yield row, linked or "", book.get(record, "")
