"""A module stands still or runs: its stops do not overlap."""

from __future__ import annotations

import datetime as dt
from zoneinfo import ZoneInfo

from fleet.actions.checks_places import first_clash
from fleet.actions.errors import AlreadyDone, BadValue, day_words
from fleet.models import Left, Module, Stop, Visit

LEAST = dt.datetime.min.replace(tzinfo=dt.UTC)
MOST = dt.datetime.max.replace(tzinfo=dt.UTC)


def standing_stops(module: Module) -> list[Stop]:
    return list(Stop.objects.standing().filter(module=module).order_by("stopped_at", "id"))


def check_stop(stop: Stop, others: list[Stop], zone: ZoneInfo) -> None:
    """Refuses a stop that ends before it began or overlaps another."""
    if stop.running_at is not None and stop.running_at < stop.stopped_at:
        raise BadValue(
            f"Running again {moment(stop.running_at, zone)}, before it stopped {moment(stop.stopped_at, zone)}. "
            "Enter a time from then on.",
            field="running_at",
        )
    other = first_clash(stop, others, start="stopped_at", end="running_at", least=LEAST, most=MOST)
    if other is None:
        return
    if other.running_at is None:
        raise AlreadyDone(
            f"{stop.module.code} stands still on record since {moment(other.stopped_at, zone)}. "
            "Correct that stop if its time is wrong.",
            field="stopped_at",
        )
    raise BadValue(
        f"{stop.module.code} stood still from {moment(other.stopped_at, zone)} to {moment(other.running_at, zone)} "
        "on record. Enter times outside that stop, or correct it first.",
        field="stopped_at",
    )


def moment(instant: dt.datetime, zone: dt.tzinfo) -> str:
    local = instant.astimezone(zone)
    return f"{day_words(local.date())}, {local:%H:%M}"


def next_change(module: Module, since: dt.datetime, stops: list[Stop]) -> dt.datetime | None:
    """When, after an instant, a visit left the module running or another stop began."""
    later = (
        Visit.objects.standing()
        .filter(module=module, happened_at__gt=since, left=Left.RUNNING)
        .order_by("happened_at")
        .values_list("happened_at", flat=True)
        .first()
    )
    begun = min((stop.stopped_at for stop in stops if stop.stopped_at > since), default=None)
    return min((instant for instant in (later, begun) if instant is not None), default=None)
