"""What scrapping a module means for its stay, its parts and its stop; and the days of its own life."""

from __future__ import annotations

import datetime as dt
from typing import Any

from django.db.models import Max, Min
from django.utils import timezone

from fleet.actions.catalogue import Saving
from fleet.actions.checks_places import Places
from fleet.actions.errors import BadValue, day_words
from fleet.actions.writes import save_again
from fleet.models import BenchJob, Fitting, Module, Outcome, Person, Placement, RemovalReason, Stage, Stop, Visit

DAYS: tuple[tuple[Any, tuple[str, ...]], ...] = (
    (Placement, ("from_on", "to_on")),
    (Fitting, ("fitted_on", "removed_on")),
    (Visit, ("happened_on",)),
    (BenchJob, ("received_on", "finished_on")),
)


def check_days(saving: Saving, module: Module) -> None:
    """Built before it was scrapped, and nothing on record before or after."""
    built, scrapped = module.built_on, module.scrapped_on
    if built is not None and scrapped is not None and scrapped < built:
        raise BadValue(
            f"Scrapped on {day_words(scrapped)}, before it was built on {day_words(built)}. Check both days.",
            field="scrapped_on",
        )
    if saving.is_new or not saving.changes("built_on", "scrapped_on"):
        return
    first, last = days_on_record(module)
    if built is not None and first is not None and first < built and saving.changes("built_on"):
        raise BadValue(
            f"{module.code} has records of {day_words(first)}. Enter a day up to then, or correct those first.",
            field="built_on",
        )
    if scrapped is not None and last is not None and last > scrapped and saving.changes("scrapped_on"):
        raise BadValue(
            f"{module.code} has records of {day_words(last)}. Enter a day from then on, or correct those first.",
            field="scrapped_on",
        )


def days_on_record(module: Module) -> tuple[dt.date | None, dt.date | None]:
    first: list[dt.date] = []
    last: list[dt.date] = []
    for model, columns in DAYS:
        rows = model.objects.standing().filter(module=module)
        ends = rows.aggregate(**{f"least_{c}": Min(c) for c in columns}, **{f"most_{c}": Max(c) for c in columns})
        first += [ends[f"least_{c}"] for c in columns if ends[f"least_{c}"] is not None]
        last += [ends[f"most_{c}"] for c in columns if ends[f"most_{c}"] is not None]
    return min(first, default=None), max(last, default=None)


def scrap(module: Module, by: Person | None) -> None:
    """It leaves its site, its job and its parts end that day, and it stands still no more."""
    day = module.scrapped_on
    assert day is not None
    place = Places(module).on(day)
    for stay in Placement.objects.current().filter(module=module):
        stay.to_on = day
        save_again(stay)
    for job in BenchJob.objects.open().filter(module=module):
        job.stage, job.finished_on, job.outcome, job.waits_for = Stage.FINISHED, day, Outcome.SCRAPPED, None
        save_again(job)
    for fitting in Fitting.objects.running().filter(module=module):
        fitting.removed_on, fitting.reason = day, RemovalReason.MODULE_WITHDRAWN
        fitting.removed_known_on = max(day, place.today)
        save_again(fitting)
    evening = dt.datetime.combine(day + dt.timedelta(days=1), dt.time(), place.zone)
    for stop in Stop.objects.now().filter(module=module):
        stop.running_at = max(stop.stopped_at, min(evening, timezone.now()))
        save_again(stop)
