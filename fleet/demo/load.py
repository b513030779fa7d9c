"""Brings the demo fleet into an empty book by the path that imports records files."""

from __future__ import annotations

import csv
import datetime as dt
import tempfile
from pathlib import Path
from typing import Any

from fleet.demo.people import give_passwords
from fleet.demo.redesigns import add_redesigns
from fleet.demo.story import Tables, tell
from fleet.history import writing
from fleet.models import Book, DataVersion, Module, Person, Site, Visit, Work, WorkState
from fleet.work import run_here


class NotEmpty(Exception):
    """The demo is only ever loaded into an empty book."""


class NotLoaded(Exception):
    """The import refused the demo's rows; its words say why."""


def load_demo(*, modules: int, years: float, seed: int, until: dt.date) -> dict[str, Any]:
    """Loads the fleet and its people; returns the import's report."""
    if Module.objects.exists() or Person.objects.exists() or Site.objects.exists():
        raise NotEmpty(
            "This book is not empty. The demo is loaded into an empty one only; set HALFNUT_DATA to a new folder."
        )
    tables = tell(modules=modules, years=years, seed=seed, until=until)
    with writing(source="demo", reason="demo fleet"), tempfile.TemporaryDirectory() as folder:
        write_tables(tables, Path(folder))
        work = Work.objects.create(
            kind="import_records", title="The demo fleet", arguments={"path": folder, "update": False, "source": "demo"}
        )
        run_here(work)
        if work.state != WorkState.DONE or work.result.get("error_count"):
            first = [str(error) for error in work.result.get("errors", [])[:5]]
            raise NotLoaded(" ".join([work.message, *first]))
        give_passwords()
        settle_book()
        mark_doubts()
        add_redesigns(until)
    return dict(work.result)


def write_tables(tables: Tables, folder: Path) -> None:
    """Each table as a CSV file."""
    for name, rows in tables.items():
        columns = list(dict.fromkeys(column for row in rows for column in row))
        with (folder / f"{name}.csv").open("w", encoding="utf-8", newline="") as file:
            writer = csv.DictWriter(file, columns, restval="")
            writer.writeheader()
            writer.writerows(rows)


def settle_book() -> None:
    book = Book.load()
    book.name, book.zone, book.made_by_demo = "Brush carriages", "Europe/Amsterdam", True
    book.visit_cost, book.stop_cost_per_day, book.bench_hour_cost = 140, 95, 62
    book.save()
    DataVersion.raise_version()


def mark_doubts() -> None:
    """Two records that somebody finds odd, so that Today has something to settle."""
    from fleet.actions.say_looks_wrong import say_looks_wrong

    words = {"SVEN": "counter looks a digit short", "BRAM": "I was at the other bay that day"}
    for code, word in words.items():
        person = Person.objects.get(code=code)
        visit = Visit.objects.for_person(person).standing().order_by("-happened_at").first()
        if visit is not None:
            say_looks_wrong(by=person, record=visit, word=word)
