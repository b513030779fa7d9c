"""A position holds one part at a time: the stays in a module's positions, read once under its lock."""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterable

from django.db.models import Q

from fleet.actions.checks_places import first_clash
from fleet.actions.entries import PartChange
from fleet.actions.errors import (
    AlreadyDone,
    BadValue,
    ChangedMeanwhile,
    NothingFitted,
    PositionTaken,
    RecordError,
    day_words,
)
from fleet.models import Fitting, Module, Position


class Stays:
    """Standing fittings of some positions of one module, those that touch a day or lie after it where one is given."""

    def __init__(self, module: Module, positions: Iterable[Position | int], since: dt.date | None = None) -> None:
        self.module = module
        keys = {position if isinstance(position, int) else position.pk for position in positions}
        # The usual order would join modules, types and positions only to sort a handful of rows.
        rows = Fitting.objects.standing().filter(module=module, position__in=keys).order_by("fitted_on", "id")
        if since is not None:
            rows = rows.filter(Q(removed_on=None) | Q(removed_on__gte=since))
        self.rows: list[Fitting] = list(rows) if keys else []

    def in_position(self, position_key: int) -> list[Fitting]:
        return [fitting for fitting in self.rows if fitting.position_id == position_key]

    def running(self, position: Position) -> Fitting | None:
        return next((stay for stay in self.in_position(position.pk) if stay.removed_on is None), None)

    def on_removal(self, position: Position, day: dt.date) -> Fitting:
        """The part that comes out of a position on a day."""
        running = self.running(position)
        if running is not None and (running.fitted_on is None or running.fitted_on <= day):
            return running
        raise self.no_removal(position, day)

    def no_removal(self, position: Position, day: dt.date) -> RecordError:
        for stay in self.in_position(position.pk):
            if stay.removed_on is not None and stay.removed_on > day and (stay.fitted_on or dt.date.min) <= day:
                return AlreadyDone(
                    f"Position {position.code}: {stay.part.code} came out on {day_words(stay.removed_on)} already, "
                    f"after {day_words(day)}. Correct or strike out that later removal first.",
                    field="reason",
                    position=position.code,
                )
        return NothingFitted(
            f"Position {position.code} of {self.module.code} holds no part on record on {day_words(day)}. "
            "Leave the reason empty to fit a part, or record first which part was in.",
            field="reason",
            position=position.code,
        )

    def check(self, fitting: Fitting) -> None:
        """Refuses a stay that overlaps another of its position."""
        other = first_clash(
            fitting,
            self.in_position(fitting.position_id),
            start="fitted_on",
            end="removed_on",
            least=dt.date.min,
            most=dt.date.max,
        )
        if other is not None:
            raise PositionTaken(
                f"Position {fitting.position.code} of {self.module.code} holds {other.part.code} {stay_words(other)}. "
                f"{remedy(fitting, other)}",
                field="fitted_on" if fitting.fitted_on is None and other.removed_on is not None else "position",
                position=fitting.position.code,
            )

    def add(self, fitting: Fitting) -> None:
        self.rows.append(fitting)


def check_seen(entry: PartChange, stays: Stays) -> None:
    """Of two who log the same change the second would take out what the first has just put in."""
    running = stays.running(entry.position)
    if entry.holds is None or entry.holds == (running.pk if running is not None else 0):
        return
    gone = Fitting.objects.filter(pk=entry.holds).first() if running is None else None
    visit = running.fitted_visit if running is not None else gone and gone.removed_visit
    who = visit.entered_by if visit else running and running.entered_by
    day = running.fitted_on if running is not None else gone and gone.removed_on
    raise ChangedMeanwhile(
        position=entry.position.code,
        who=who.name if who else "Somebody",
        day=f" on {day_words(day)}" if day else "",
        now=f"{running.part.code} is in now" if running is not None else "it is empty now",
        holds=running.pk if running is not None else 0,
    )


def stay_words(stay: Fitting) -> str:
    begun = f"since {day_words(stay.fitted_on)}" if stay.removed_on is None and stay.fitted_on else ""
    if stay.removed_on is None:
        return begun or "since an unknown day"
    if stay.fitted_on is None:
        return f"until {day_words(stay.removed_on)}"
    return f"from {day_words(stay.fitted_on)} to {day_words(stay.removed_on)}"


def remedy(fitting: Fitting, other: Fitting) -> str:
    if fitting.fitted_on is None and other.removed_on is not None:
        return f"Enter the day the part went in, from {day_words(other.removed_on)} on."
    if other.removed_on is None:
        return "Say first why it came out."
    return "Choose days outside that stay, or correct it first."


def check_ages(fitting: Fitting) -> None:
    """Measured strokes and hours do not fall between fitting and removal."""
    for unit in ("strokes", "hours"):
        begun, ended = getattr(fitting, f"{unit}_at_fit"), getattr(fitting, f"{unit}_at_removal")
        if begun is not None and ended is not None and ended < begun:
            raise BadValue(
                f"At the removal the module had {ended:g} {unit}, fewer than {begun:g} when the part went in. "
                "Check both numbers.",
                field=f"{unit}_at_removal",
            )
