"""Refusals of questions about lives."""

from __future__ import annotations

from collections.abc import Iterable

SHOWN = 12


class NothingNamed(ValueError):
    """A component, part, site, clock … that does not exist; says which do."""

    def __init__(self, noun: str, given: str, known: Iterable[str]) -> None:
        names = sorted(known)
        rest = f" and {len(names) - SHOWN} more" if len(names) > SHOWN else ""
        remedy = f"Choose one of {', '.join(names[:SHOWN])}{rest}." if names else f"No {noun} is in the book yet."
        super().__init__(f"There is no {noun} {given}. {remedy}")
        self.noun, self.given = noun, given
