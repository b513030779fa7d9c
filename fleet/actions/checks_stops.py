"""A module stands still or runs: its stops do not overlap."""

from __future__ import annotations

import datetime as dt
from zoneinfo import ZoneInfo

from fleet.actions.checks_places import first_clash
from fleet.actions.errors import AlreadyDone, BadValue, day_words
from fleet.actions.writes import save_again
from fleet.models import Left, Module, Placement, Site, SiteKind, Stop, Visit

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


def end_of_standing(module: Module, since: dt.datetime, stops: list[Stop]) -> dt.datetime | None:
    """When what stands still from an instant on does so no more: as above, or it came to a depot."""
    ends = (next_change(module, since, stops), came_to_depot(module, since))
    return min((instant for instant in ends if instant is not None), default=None)


def came_to_depot(module: Module, since: dt.datetime) -> dt.datetime | None:
    """The first moment, from an instant on, at which a stay at a depot began: there nothing stands still."""
    stays = Placement.objects.standing().filter(module=module, site__kind=SiteKind.DEPOT).select_related("site")
    mornings = [
        max(since, morning(stay.from_on, stay.site)) for stay in stays if stay.from_on >= stay.site.day_of(since)
    ]
    return min(mornings, default=None)


def morning(day: dt.date, site: Site) -> dt.datetime:
    return dt.datetime.combine(day, dt.time(), site.tz)


def end_stop_at_depot(stay: Placement) -> None:
    """A module that comes to a depot stands still no more; its parts do not age there either."""
    if stay.site.kind != SiteKind.DEPOT:
        return
    for stop in Stop.objects.now().filter(module=stay.module):
        stop.running_at = max(stop.stopped_at, morning(stay.from_on, stay.site))
        save_again(stop)
