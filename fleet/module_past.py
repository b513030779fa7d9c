"""A module's past as one person may see it: whole, or only the stretches in which it stood at sites of theirs."""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from typing import Any
from zoneinfo import ZoneInfo

from fleet.formats import long_day, moment
from fleet.life_lines import CUT, FAILED, RUNNING, WITHDRAWN, Bar, Shade
from fleet.models import FAILURE_REASONS, BenchJob, Fitting, Placement, SiteKind, Stop


@dataclass(frozen=True)
class Window:
    """A stretch of days that may be seen, both ends included."""

    first: dt.date
    last: dt.date

    def holds(self, day: dt.date | None) -> bool:
        return day is not None and self.first <= day <= self.last


def windows_of(person: Any, stays: Iterable[Placement], today: dt.date) -> list[Window] | None:
    """None where nothing is hidden. `stays` are those the person may see."""
    if person.all_sites and person.role != "bench":
        return None
    return [Window(stay.from_on, stay.to_on or today) for stay in stays]


@dataclass(frozen=True)
class SeenStay:
    """What of a fitting may be told: None at an end means that it lies out of sight (or was never known)."""

    fitting: Fitting
    fitted_on: dt.date | None
    ended_on: dt.date | None  # failed, else removed
    removed_on: dt.date | None
    runs: bool
    windows: list[Window] | None

    @property
    def came_out(self) -> bool:
        return self.removed_on is not None

    @property
    def begun_in_sight(self) -> bool:
        return self.windows is None or self.fitted_on is not None


def seen_stay(fitting: Fitting, windows: list[Window] | None) -> SeenStay:
    failed_or_removed = fitting.failed_on or fitting.removed_on
    if windows is None:
        return SeenStay(
            fitting, fitting.fitted_on, failed_or_removed, fitting.removed_on, fitting.removed_on is None, None
        )

    def shown(day: dt.date | None) -> dt.date | None:
        return day if any(window.holds(day) for window in windows) else None

    removed = shown(fitting.removed_on)
    ended = (shown(failed_or_removed) or removed) if removed else None
    return SeenStay(fitting, shown(fitting.fitted_on), ended, removed, fitting.removed_on is None, windows)


def bars_of(stay: SeenStay, *, rank: int, first: dt.date, today: dt.date) -> Iterator[Bar]:
    """One bar, or one for each stretch in sight."""
    fitting = stay.fitting
    begun = fitting.fitted_on or first
    ended = fitting.removed_on or today
    for window in stay.windows if stay.windows is not None else [Window(min(first, begun), today)]:
        start, end = max(begun, window.first), min(ended, window.last)
        if start > end:
            continue
        ends_here = end == ended
        yield Bar(
            start=start.toordinal(),
            end=end.toordinal() + (1 if stay.runs and ends_here else 0),
            rank=rank,
            ending=ending_of(fitting) if ends_here else CUT,
            code=fitting.part.code,
            words=stay_words(stay),
            open_start=fitting.fitted_on is None or start > begun,
            failed_at=failed_at(fitting, start, end) if ends_here else None,
        )


def ending_of(fitting: Fitting) -> str:
    if fitting.removed_on is None:
        return RUNNING
    return FAILED if fitting.reason in FAILURE_REASONS else WITHDRAWN


def failed_at(fitting: Fitting, start: dt.date, end: dt.date) -> float | None:
    """The day of a failure that came before the removal."""
    day = fitting.failed_on
    if fitting.reason not in FAILURE_REASONS or day is None or not start <= day < end:
        return None
    return day.toordinal()


def stay_words(stay: SeenStay) -> str:
    """`DN-3, 4 October 2025 to 6 January 2026: failed, thread worn out`"""
    fitting = stay.fitting
    if stay.fitted_on:
        begun = f"fitted {long_day(stay.fitted_on)}"
    else:
        begun = "fitting day not known" if stay.windows is None else "fitted before"
    if stay.runs:
        return f"{fitting.part.code}: {begun}, still running"
    if not stay.came_out:
        return f"{fitting.part.code}: {begun}"
    mode = f", {fitting.mode.title}" if fitting.mode else ""
    failed = f" (failed {long_day(fitting.failed_on)})" if fitting.failed_on not in (None, stay.removed_on) else ""
    return f"{fitting.part.code}: {begun}, out {long_day(stay.removed_on)}{failed}: {fitting.reason}{mode}"


def day_number(instant: dt.datetime, zone: ZoneInfo) -> float:
    """The instant as an ordinal day with its fraction, in the site's own time."""
    local = instant.astimezone(zone)
    return local.toordinal() + (local.hour * 60 + local.minute) / 1440


def job_words(job: BenchJob) -> str:
    """`10 November 2026 to 20 November 2026: ready`"""
    begun = long_day(job.received_on)
    if job.finished_on is None:
        return f"since {begun}: {job.stage}"
    return f"{begun} to {long_day(job.finished_on)}: {job.outcome}"


def shades_of(
    stops: Iterable[Stop], stays: Sequence[Placement], zone: ZoneInfo, now: float, jobs: Sequence[BenchJob] = ()
) -> Iterator[Shade]:
    for stop in stops:
        end = day_number(stop.running_at, zone) if stop.running_at else now
        until = moment(stop.running_at.astimezone(zone)) if stop.running_at else "now"
        words = f"stood still from {moment(stop.stopped_at.astimezone(zone))} to {until}"
        yield Shade("stop", day_number(stop.stopped_at, zone), end, words)
    for stay in stays:
        if stay.site.kind == SiteKind.DEPOT:
            end = stay.to_on.toordinal() if stay.to_on else now
            until = long_day(stay.to_on) if stay.to_on else "now"
            words = f"at {stay.site.title} from {long_day(stay.from_on)} to {until}"
            last = stay.to_on or dt.date.max
            during = [job for job in jobs if job.depot_id == stay.site_id and stay.from_on <= job.received_on <= last]
            words += "".join(f"; on the bench {job_words(job)}" for job in during)
            yield Shade("away", stay.from_on.toordinal(), end, words)


def in_sight(day: float, windows: list[Window] | None) -> bool:
    if windows is None:
        return True
    return any(window.first.toordinal() <= day < window.last.toordinal() + 1 for window in windows)
