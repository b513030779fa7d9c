"""What a forecast is asked."""

from __future__ import annotations

import datetime as dt
import hashlib
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

from django.utils import timezone

from fleet.models import Component
from reliability.forecasts.horizon import WEEK, WEEKS, next_quarter
from reliability.forecasts.what_if import WhatIf

NEAR_DAYS = 3
WHOLE_WEEKS = (1, 2, 3, 4, 6, 12)
BASE = WhatIf()


@dataclass(frozen=True)
class Question:
    """A component, the days counted, what is known by when, where, and what is assumed."""

    component: Component
    begin: dt.date
    days: int
    as_of: dt.date
    sites: tuple[str, ...] | None = None
    by_type: bool = False
    what_if: WhatIf = BASE
    known_on: dt.date | None = None  # in the past: only what had reached the book by then

    @property
    def gap(self) -> int:
        """Days between the start of the count and the first day counted."""
        days = (self.begin - self.as_of).days
        return (days + NEAR_DAYS) // WEEK * WEEK if self.days % WEEK == 0 else days

    @property
    def shift(self) -> int:
        """Days by which the start of the count lies after the as-of day; negative: before it."""
        return (self.begin - self.as_of).days - self.gap

    @property
    def start(self) -> dt.date:
        """The day on which the count starts."""
        return self.as_of + dt.timedelta(days=self.shift)

    @property
    def span(self) -> int:
        return self.gap + self.days

    @property
    def base(self) -> Question:
        """The same without assumptions; the quantity to plan for stays at its level."""
        return replace(self, what_if=WhatIf(service_level=self.what_if.service_level))

    def share_for(self, size: float, sample: int) -> float:
        """About which share of so many positions a sample is, so that it is changed by whole parts in whole weeks."""
        share = min(1.0, sample / max(size, 1.0))
        retrofits = self.what_if.retrofit_a_week
        if retrofits is None or share >= 1.0:
            return share
        pace = retrofits * share
        even = float(round(pace)) if pace >= 1.0 else 1.0 / min(WHOLE_WEEKS, key=lambda weeks: abs(1.0 / weeks - pace))
        return min(1.0, even / retrofits)

    def of_share(self, share: float) -> Question:
        """The same of a share of the positions: as many fewer retrofits a week."""
        retrofits = self.what_if.retrofit_a_week
        if retrofits is None or share == 1.0:
            return self
        return replace(self, what_if=replace(self.what_if, retrofit_a_week=retrofits * share))

    @property
    def switch_day(self) -> int:
        """Days from the start of the count to the day from which a superseding part goes in; 0: from the start."""
        begin = self.what_if.superseding_from
        return 0 if begin is None else max((begin - self.start).days, 0)

    @property
    def superseded_from_start(self) -> str | None:
        """The superseding part, if it is all that goes in."""
        return self.what_if.superseding if self.switch_day == 0 else None

    def seed(self, part: str) -> int:
        """The same question gives the same answer, and every what-if of it takes the same draws."""
        text = f"{self.component.code} {self.begin} {self.days} {self.as_of} {self.sites} {part}"
        return int.from_bytes(hashlib.sha256(text.encode()).digest()[:8], "big")

    def asked(self) -> dict[str, Any]:
        """The question as JSON can hold it."""
        known = {} if self.known_on is None else {"known_on": self.known_on.isoformat()}
        return {
            **known,
            "component": self.component.code,
            "begin": self.begin.isoformat(),
            "days": self.days,
            "as_of": self.as_of.isoformat(),
            "sites": list(self.sites) if self.sites is not None else None,
            "by_type": self.by_type,
            "what_if": self.what_if.told(),
        }


def question_of(
    component: Component,
    *,
    begin: dt.date | None = None,
    days: int | None = None,
    as_of: dt.date | None = None,
    sites: Sequence[str] | None = None,
    by_type: bool = False,
    what_if: WhatIf | None = None,
    known_on: dt.date | None = None,
) -> Question:
    """The default is 13 whole weeks from the first Monday of the next calendar quarter."""
    today = as_of or timezone.localdate()
    return Question(
        component=component,
        begin=max(begin or next_quarter(today), today),
        days=days or WEEKS * WEEK,
        as_of=today,
        sites=None if sites is None else tuple(sorted(sites)),
        by_type=by_type,
        what_if=what_if or BASE,
        known_on=known_on,
    )
