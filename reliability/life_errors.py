"""Refusals of questions about lives."""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterable

from fleet.formats import long_day

SHOWN = 12


class QuestionRefused(ValueError):
    """A question that has no answer; its text can be shown to people."""


class NothingNamed(QuestionRefused):
    """A component, part, site, clock … that does not exist; says which do."""

    def __init__(self, noun: str, given: str, known: Iterable[str]) -> None:
        names = sorted(known)
        rest = f" and {len(names) - SHOWN} more" if len(names) > SHOWN else ""
        remedy = f"Choose one of {', '.join(names[:SHOWN])}{rest}." if names else f"No {noun} is in the book yet."
        super().__init__(f"There is no {noun} {given}. {remedy}")
        self.noun, self.given = noun, given


class NotYet(QuestionRefused):
    """A day that has not come anywhere: running parts would count as good on it."""

    def __init__(self, day: dt.date) -> None:
        super().__init__(f"{long_day(day)} has not come yet. Choose today or an earlier day.")
        self.day = day
