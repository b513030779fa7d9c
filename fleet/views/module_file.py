"""The life lines of a module as a file: the same stays that the drawing shows."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from django.http import StreamingHttpResponse

from fleet.module_page import ModulePage
from fleet.views.listing import as_csv

HEAD = [
    "position",
    "part",
    "serial",
    "lot",
    "fitted_on",
    "failed_on",
    "removed_on",
    "reason",
    "mode",
    "age",
    "clock",
    "counted",
    "struck_out",
]


def as_file(page: ModulePage) -> StreamingHttpResponse:
    return as_csv(f"{page.module.code} life lines", HEAD, lines(page))


def lines(page: ModulePage) -> Iterator[list[Any]]:
    for line in page.fitting_lines():
        stay, fitting, age = line.stay, line.stay.fitting, line.age
        yield [
            line.name,
            fitting.part.code,
            fitting.serial,
            fitting.lot,
            stay.fitted_on,
            fitting.failed_on if stay.came_out else None,
            stay.removed_on,
            fitting.reason if stay.came_out else "",
            fitting.mode.title if stay.came_out and fitting.mode else "",
            round(age.value) if age and age.value is not None else None,
            age.clock if age else "",
            ("yes" if age.measured else "no") if age else "",
            fitting.struck_out,
        ]
