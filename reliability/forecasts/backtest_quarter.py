"""One past quarter judged: what a forecast would have said on its first day, what happened, and two plain rivals.

A measure is something that is forecast and then happens. Each says where its forecast, its actual figure and its
rivals come from; what is scored, drawn and written is the same for all.
"""

from __future__ import annotations

import datetime as dt
import hashlib
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np
from django.db.models import Min
from django.db.models.functions import Coalesce

from fleet.models import Component, Fitting
from reliability.forecasts.horizon import WEEK, WEEKS, next_quarter
from reliability.forecasts.rivals import constant_rate, same_as_last_quarter
from reliability.forecasts.what_happened import Happened, failures_between, failures_in_modules_that_came_later
from reliability.stats.scoring import crps, randomised_pit

if TYPE_CHECKING:
    from reliability.forecasts.next_quarter import Distributions
    from reliability.stats.count_results import CountDistribution

DAYS = WEEKS * WEEK
BANDS = (0.5, 0.8, 0.95)
LEAST_SHOWN = 1e-9  # probabilities below it are not kept
NOTHING_RAN = "no part was known to run"
NO_LIFE = "no life was on record"
ENDED = ("failed", "worn", "withdrawn", "not known")  # lives after which another part goes in


@dataclass(frozen=True)
class Stand:
    """The evening before a quarter's first day, and what had reached the book by then."""

    component: Component
    begin: dt.date

    @property
    def as_of(self) -> dt.date:
        return self.begin - dt.timedelta(days=1)

    @property
    def end(self) -> dt.date:
        return self.begin + dt.timedelta(days=DAYS)

    @cached_property
    def forecast(self) -> Distributions:
        from reliability.forecasts.next_quarter import forecast_distributions, question_of

        asked = question_of(self.component, begin=self.begin, days=DAYS, as_of=self.as_of, known_on=self.as_of)
        return forecast_distributions(asked)

    @cached_property
    def happened(self) -> Happened:
        """As known now."""
        return failures_between(self.component, self.begin, self.end)

    @cached_property
    def before(self) -> Happened:
        """As many days before, as known then."""
        return failures_between(self.component, self.begin - dt.timedelta(days=DAYS), self.begin, known_on=self.as_of)

    @cached_property
    def first_record(self) -> dt.date | None:
        return first_record(self.component)

    @property
    def passed_over(self) -> str:
        """Why nothing could be forecast then; empty where it could."""
        if self.first_record is None or self.first_record > self.as_of or not self.forecast.running.rows:
            return NOTHING_RAN
        return NO_LIFE if self.forecast.found.lifetimes is None else ""

    def rate(self, *states: str) -> CountDistribution | None:
        """The constant rate of lives that ended in these ways."""
        found = self.forecast.found
        exposure = 0.0 if found.lifetimes is None else found.lifetimes.exposure
        return constant_rate(found.count(*states), exposure, self.forecast.running, DAYS)


@dataclass(frozen=True)
class Measure:
    """What is forecast and then happens; `units` names several, `came` says that they did: 12 failures happened."""

    title: str
    units: str
    came: str
    forecast: Callable[[Stand], CountDistribution]
    actual: Callable[[Stand], int]
    rivals: Mapping[str, Callable[[Stand], CountDistribution | None]]


def before(events: Callable[[Happened], int]) -> Callable[[Stand], CountDistribution | None]:
    """The rival that copies the quarter before."""
    return lambda stand: same_as_last_quarter(events(stand.before), stand.before, stand.first_record)


MEASURES = {
    "failures": Measure(
        title="Failures",
        units="failures",
        came="happened",
        forecast=lambda stand: stand.forecast.failures,
        actual=lambda stand: stand.happened.failures,
        rivals={
            "constant_rate": lambda stand: stand.rate("failed"),
            "last_quarter": before(lambda happened: happened.failures),
        },
    ),
    "parts_used": Measure(
        title="Parts used",
        units="parts",
        came="were used",
        forecast=lambda stand: stand.forecast.parts_used,
        actual=lambda stand: stand.happened.parts_used,
        rivals={
            "constant_rate": lambda stand: stand.rate(*ENDED),
            "last_quarter": before(lambda happened: happened.parts_used),
        },
    ),
}


def first_record(component: Component) -> dt.date | None:
    """The earliest day of any fitting of the component."""
    days = Fitting.objects.standing().filter(part__component=component)
    return days.aggregate(day=Min(Coalesce("fitted_on", "removed_on")))["day"]


def past_quarters(today: dt.date, count: int) -> list[dt.date]:
    """First days (Mondays) of the last quarters whose 13 weeks are over, in the order of time."""
    begin, found = today, []
    while len(found) < count:
        begin = quarter_before(begin)
        if begin + dt.timedelta(days=DAYS) <= today:
            found.append(begin)
    return found[::-1]


def quarter_before(day: dt.date) -> dt.date:
    """The last first Monday of a calendar quarter before the day."""
    candidate = next_quarter(day - dt.timedelta(days=2 * DAYS + WEEK * 2))
    while (following := next_quarter(candidate)) < day:
        candidate = following
    return candidate


def judge_quarter(stand: Stand) -> dict[str, Any]:
    """Plain values, one entry a measure; or `passed_over` with the reason."""
    if stand.passed_over:
        return {"from": stand.begin.isoformat(), "passed_over": stand.passed_over}
    return {
        "from": stand.begin.isoformat(),
        "until": stand.end.isoformat(),
        "as_of": stand.as_of.isoformat(),
        "positions": stand.forecast.running.count,
        "in_modules_that_came_later": failures_in_modules_that_came_later(stand.component, stand.begin, stand.end),
        "measures": {name: judged(name, measure, stand) for name, measure in MEASURES.items()},
    }


def judged(name: str, measure: Measure, stand: Stand) -> dict[str, Any]:
    distribution, actual = measure.forecast(stand), measure.actual(stand)
    rivals = {key: rival(stand) for key, rival in measure.rivals.items()}
    seed = hashlib.sha256(f"{stand.component.code} {stand.begin} {name}".encode()).digest()[:8]
    rng = np.random.default_rng(int.from_bytes(seed, "big"))
    return {
        **scored(distribution, actual),
        "median": distribution.quantile(0.5),
        "failures_known": stand.forecast.found.count("failed"),
        "actual": actual,
        "pit": float(randomised_pit(distribution.pmf, actual, rng)),
        "pmf": kept_part(distribution),
        "rivals": {key: None if each is None else scored(each, actual) for key, each in rivals.items()},
    }


def scored(distribution: CountDistribution, actual: int) -> dict[str, Any]:
    """Expected count, bands, what each band promised to hold and whether it held, and CRPS."""
    bands = {f"{band:g}": distribution.interval(band) for band in BANDS}
    return {
        "expected": distribution.mean,
        "bands": {band: list(ends) for band, ends in bands.items()},
        "promised": {
            band: min(1.0, float(distribution.pmf[low : high + 1].sum())) for band, (low, high) in bands.items()
        },
        "held": {band: low <= actual <= high for band, (low, high) in bands.items()},
        "crps": float(crps(distribution.pmf, actual)),
    }


def kept_part(distribution: CountDistribution) -> dict[str, Any]:
    """The probabilities that matter, from the first count on, so that sums over quarters can be made later."""
    shown = np.flatnonzero(distribution.pmf > LEAST_SHOWN)
    first, last = int(shown[0]), int(shown[-1])
    return {"from": first, "chances": [float(f"{each:.6g}") for each in distribution.pmf[first : last + 1]]}
