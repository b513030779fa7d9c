"""A module stands in at most one place at a time."""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterable

from fleet.actions.checks_places import first_clash
from fleet.actions.errors import BadValue, ModuleElsewhere, day_words
from fleet.models import Placement


def check_placement(stay: Placement, others: Iterable[Placement]) -> None:
    if stay.to_on is not None and stay.to_on < stay.from_on:
        raise BadValue(
            f"Until {day_words(stay.to_on)}, before it came on {day_words(stay.from_on)}. Enter a day from then on.",
            field="to_on",
        )
    other = first_clash(stay, others, start="from_on", end="to_on", least=dt.date.min, most=dt.date.max)
    if other is not None:
        until = f"to {day_words(other.to_on)}" if other.to_on else "until now"
        raise ModuleElsewhere(
            f"{stay.module.code} stands at {other.site.code} from {day_words(other.from_on)} {until} on record. "
            "Enter days outside that stay, or correct it first.",
            field="from_on",
        )
