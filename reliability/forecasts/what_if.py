"""What a forecast may be asked to assume: the base case is `WhatIf()`.

The document of such a question is `forecast_document(Question(…, what_if=…))`; what it differs by from the base case is
`reliability.forecasts.difference.difference_document`, whose bands come from the same draws and the same chance, for
the difference of two bands is no band of the difference.
"""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass, fields
from typing import Any

from reliability.life_errors import QuestionRefused

LEAST_SERVICE, MOST_SERVICE = 0.5, 0.999
MOST_DUTY = 10.0


class UnusableWhatIf(QuestionRefused):
    """A figure that no forecast can assume; `field` is the name of the figure."""

    def __init__(self, field: str, words: str) -> None:
        super().__init__(words)
        self.field = field


class NotCountedYet(QuestionRefused):
    """A combination of assumptions that the count does not cover: better no number than a wrong one."""


@dataclass(frozen=True)
class WhatIf:
    """duty: factor on the use of every module (1.2 is a fifth more strokes a day).

    replace_at: planned replacement at this age on the component's clock, for every part.
    superseding, superseding_from: parts fitted from that day on are of this design (its code).
    retrofit_a_week: old parts still running that are changed for the superseding one each week from that day.
    service_level: share of cases in which the quantity to plan for is enough.
    """

    duty: float = 1.0
    replace_at: float | None = None
    superseding: str | None = None
    superseding_from: dt.date | None = None
    retrofit_a_week: float | None = None
    service_level: float = 0.95

    def __post_init__(self) -> None:
        if not 0 < self.duty <= MOST_DUTY:
            raise UnusableWhatIf("duty", f"Duty times {self.duty:g} is no duty. Give a factor up to {MOST_DUTY:g}.")
        if self.replace_at is not None and not 0 < self.replace_at < float("inf"):
            raise UnusableWhatIf("replace_at", f"{self.replace_at:g} is no age. Give an age above 0.")
        if not LEAST_SERVICE <= self.service_level <= MOST_SERVICE:
            least, most = 100 * LEAST_SERVICE, 100 * MOST_SERVICE
            raise UnusableWhatIf(
                "service_level", f"{100 * self.service_level:g} of 100 is out of reach. Give {least:g} to {most:g}."
            )
        if self.superseding is None:
            if self.superseding_from is not None:
                raise UnusableWhatIf("superseding", "A day is given, but no part that goes in from then on.")
            if self.retrofit_a_week is not None:
                raise UnusableWhatIf("superseding", "Retrofits are given, but no part that goes in.")
        if self.retrofit_a_week is not None and not 0 < self.retrofit_a_week < float("inf"):
            raise UnusableWhatIf("retrofit_a_week", f"{self.retrofit_a_week:g} retrofits a week are none. Give more.")

    @property
    def is_base(self) -> bool:
        """Whether nothing but the service level is asked to be otherwise."""
        return self.changes() == {}

    def changes(self) -> dict[str, Any]:
        """What is assumed beyond the base case, without the service level."""
        return {name: value for name, value in self.told().items() if name != "service_level"}

    def told(self) -> dict[str, Any]:
        """Every figure that differs from the base case, as JSON can hold it."""
        found = {
            item.name: getattr(self, item.name) for item in fields(self) if getattr(self, item.name) != item.default
        }
        return {name: value.isoformat() if isinstance(value, dt.date) else value for name, value in found.items()}

    @classmethod
    def from_told(cls, told: dict[str, Any]) -> WhatIf:
        """The same again from what `told` gave."""
        found = dict(told)
        if found.get("superseding_from"):
            found["superseding_from"] = dt.date.fromisoformat(found["superseding_from"])
        return cls(**found)
