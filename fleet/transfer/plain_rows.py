"""Rows of a query as they go into a file, read in pieces."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from django.db.models import QuerySet

CHUNK = 5000
Rows = Iterator[tuple[Any, ...]]


def plain(query: QuerySet[Any], *columns: Any) -> Rows:
    return query.values_list(*columns).iterator(chunk_size=CHUNK)
