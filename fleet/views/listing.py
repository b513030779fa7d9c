"""A list that filters, sorts, pages and exports, and keeps all of that in its address."""

from __future__ import annotations

import csv
import datetime as dt
from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass, field
from typing import Any

from django.core.paginator import Paginator
from django.db.models import F, QuerySet
from django.http import HttpRequest, HttpResponse, StreamingHttpResponse
from django.shortcuts import render
from django.utils.timezone import is_aware

PAGE_SIZE = 50


@dataclass(frozen=True)
class Column:
    """`cell` for the screen (see parts/table.html), `plain` for files, `sort` names the fields to sort by."""

    key: str
    label: str
    cell: Callable[[Any], Any]
    plain: Callable[[Any], Any] | None = None
    sort: tuple[str, ...] = ()
    numeric: bool = False

    def head(self) -> dict[str, Any]:
        return {"key": self.key, "label": self.label, "numeric": self.numeric, "sort": bool(self.sort)}

    def in_file(self, row: Any) -> Any:
        if self.plain:
            return self.plain(row)
        cell = self.cell(row)
        return cell.get("text", "") if isinstance(cell, dict) else cell


@dataclass(frozen=True)
class Listing:
    """What a list shows; `answer` reads the address and writes the page or the file."""

    columns: list[Column]
    what: str  # plural noun of its rows
    caption: str
    sort: str  # key of the column it is sorted by at first
    template: str = "list/page.html"
    empty_state: str = "Nothing here yet."
    empty_remedy: str = ""
    narrow: str = "stacked"
    extra: dict[str, Any] = field(default_factory=dict)

    def answer(
        self, request: HttpRequest, rows: QuerySet[Any], filter_set: Any = None, **context: Any
    ) -> HttpResponse | StreamingHttpResponse:
        chosen = filter_set(request.GET, queryset=rows, request=request) if filter_set else None
        rows = self.sorted(chosen.qs if chosen is not None else rows, request.GET.get("sort", ""))
        if request.GET.get("as") == "csv":
            return as_csv(self.what, [column.label for column in self.columns], self.lines(rows))
        page = Paginator(rows, PAGE_SIZE).get_page(request.GET.get("page"))
        filtered = bool(chosen is not None and any(chosen.form.data.get(name) for name in chosen.filters))
        return render(
            request,
            self.template,
            {
                "filter": chosen,
                "form": None,
                "columns": [column.head() for column in self.columns],
                "rows": [{"cells": [column.cell(row) for column in self.columns]} for row in page],
                "page": page,
                "what": self.what,
                "caption": self.caption,
                "narrow": self.narrow,
                "exports": [{"name": "CSV", "url": csv_address(request)}],
                "empty_state": f"No {self.what} match these filters." if filtered else self.empty_state,
                "empty_remedy": "Widen a filter, or show all." if filtered else self.empty_remedy,
                **self.extra,
                **context,
            },
        )

    def sorted(self, rows: QuerySet[Any], asked: str) -> QuerySet[Any]:
        falling = asked.startswith("-")
        columns = {column.key: column for column in self.columns if column.sort}
        column = columns.get(asked.removeprefix("-")) or columns[self.sort.removeprefix("-")]
        if asked.removeprefix("-") not in columns:
            falling = self.sort.startswith("-")
        order = []
        for name in column.sort:
            last = empty_last(rows, name)
            order.append(F(name).desc(nulls_last=last) if falling else F(name).asc(nulls_last=last))
        return rows.order_by(*order, "pk")

    def lines(self, rows: QuerySet[Any]) -> Iterator[list[Any]]:
        for row in rows.iterator(chunk_size=2000) if not rows._prefetch_related_lookups else rows:  # type: ignore[attr-defined]
            yield [column.in_file(row) for column in self.columns]


def empty_last(rows: QuerySet[Any], name: str) -> bool | None:
    """Where a column is never empty, saying so would only keep its index from being used."""
    own = {field.name: field for field in rows.model._meta.concrete_fields}
    return None if name in own and not own[name].null else True


def csv_address(request: HttpRequest) -> str:
    query = request.GET.copy()
    query.pop("page", None)
    query["as"] = "csv"
    return f"?{query.urlencode()}"


def safe_cell(value: Any) -> Any:
    """Text that a spreadsheet would run as a formula is quoted; instants are written in ISO."""
    if isinstance(value, dt.datetime):
        return value.isoformat(timespec="minutes") if is_aware(value) else value
    if value is None:
        return ""
    if isinstance(value, str) and value.startswith(("=", "+", "-", "@", "\t", "\r")):
        return f"'{value}"
    return value


class _Echo:
    def write(self, value: str) -> str:
        return value


def as_csv(name: str, head: list[str], lines: Iterable[list[Any]]) -> StreamingHttpResponse:
    """Rows as a file, written as they are read."""
    writer = csv.writer(_Echo())  # type: ignore[arg-type]

    def body() -> Iterator[str]:
        yield "\ufeff" + writer.writerow(head)
        for line in lines:
            yield writer.writerow([safe_cell(value) for value in line])

    answer = StreamingHttpResponse(body(), content_type="text/csv; charset=utf-8")
    answer["Content-Disposition"] = f'attachment; filename="{name.replace(" ", "-")}.csv"'
    return answer
