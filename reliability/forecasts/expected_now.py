"""What was expected of this week and this quarter when they began, so that Today can say whether they are unusual.

For each component the worker makes the two forecasts once a day, as they would have been made on the evening before
the week and the quarter began, up to and including today, and keeps them. The page only reads them and counts what
failed since. Of those failures some are not in the book yet: how many usually are, goes by how late the component's
failures reached it before.
"""

from __future__ import annotations

import datetime as dt
import json
from collections.abc import Iterable
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from django.utils import timezone

from fleet.models import Component
from reliability.forecasts.backtest_quarter import kept_part, quarter_before
from reliability.forecasts.backtest_summary import distribution_of
from reliability.forecasts.what_happened import failures_by_component, lags_to_the_book
from reliability.kept import key_of
from reliability.models import KeptResult

if TYPE_CHECKING:
    from reliability.stats.count_results import CountDistribution

KIND = "expected now"
BAND = 0.8
LEVEL = 0.01  # chance that anything at all is called unusual on a day on which every forecast is right
ODD = 0.05  # a component's own two-sided chance below which it is at least worth a word
STRETCHES = ("week", "quarter")
LONGEST_LAG = 60  # days; longer ones belong to books that were filled in afterwards
FEWEST_LAGS = 10  # with fewer nobody knows how late reports come, and all are taken to be in
LATE = 0.98  # share in the book below which a sentence says so


@dataclass(frozen=True)
class Seen:
    """One component in one stretch of days: what failed, what was expected, and how far out that is."""

    component: str
    title: str
    stretch: str
    begin: dt.date
    count: int
    expected: float
    low: int
    high: int
    chance: float
    more: bool
    unusual: bool
    reported: float = 1.0  # share of the stretch's failures that is usually in the book by now

    @property
    def odd(self) -> bool:
        return self.chance < ODD


@dataclass(frozen=True)
class Now:
    """All comparisons of a day; `until` is the last day counted."""

    until: dt.date
    week: dt.date
    quarter: dt.date
    seen: tuple[Seen, ...]
    missing: int  # components without a kept expectation of these days


def begins(today: dt.date) -> dict[str, dt.date]:
    """First days of the week and of the quarter (its first Monday) that today lies in."""
    tomorrow = today + dt.timedelta(days=1)
    return {"week": today - dt.timedelta(days=today.weekday()), "quarter": quarter_before(tomorrow)}


def count_expected(component: Component, today: dt.date) -> dict[str, Any] | None:
    """The two forecasts of a component as plain values; None where there is nothing to learn from or nothing runs."""
    from reliability.forecasts.next_quarter import forecast_distributions, question_of

    found: dict[str, Any] = {"until": today.isoformat()}
    for stretch, begin in begins(today).items():
        eve = begin - dt.timedelta(days=1)
        days = (today - begin).days + 1
        told = forecast_distributions(question_of(component, begin=begin, days=days, as_of=eve, known_on=eve))
        if told.found.lifetimes is None or not told.running.rows:
            return None
        share, known = reported(lags_to_the_book(component, today - dt.timedelta(days=LONGEST_LAG)), days)
        in_the_book = thinned(told.failures, share, known)
        low, high = in_the_book.interval(BAND)
        found[stretch] = {
            "from": begin.isoformat(),
            "expected": in_the_book.mean,
            "band": [low, high],
            "pmf": kept_part(in_the_book),
            "reported": share,
        }
    return found


def reported(lags: list[int], days: int) -> tuple[float, int]:
    """Share of the failures of the last `days` days, today's among them, that is in the book; and by how many lags."""
    usual = [lag for lag in lags if lag <= LONGEST_LAG]
    if len(usual) < FEWEST_LAGS:
        return 1.0, 0
    # a lag of three days keeps out today, yesterday and the day before
    return sum(max(days - lag, 0) for lag in usual) / (days * len(usual)), len(usual)


def thinned(count: CountDistribution, share: float, known: int) -> CountDistribution:
    """The part of a count that is in the book, beta-binomial, for the share is learned from `known` failures."""
    from reliability.stats.count_compound import taken_along
    from reliability.stats.count_results import CountDistribution

    if share >= 1.0:
        return count
    return CountDistribution(taken_along(count.pmf, share * known, (1.0 - share) * known))


def keep_expected(component: Component, today: dt.date) -> None:
    text = json.dumps(count_expected(component, today), allow_nan=False, separators=(",", ":"))
    KeptResult.objects.update_or_create(
        kind=KIND,
        key=key_of({"component": component.code}),
        defaults={"data_version": 0, "payload": text.encode(), "made_at": timezone.now()},
    )


def expected_now(components: Iterable[Component]) -> Now | None:
    """What is kept for the latest day of all, beside what failed since; None where nothing is kept yet."""
    chosen = {key_of({"component": each.code}): each for each in components}
    rows = KeptResult.objects.filter(kind=KIND, key__in=list(chosen)).values_list("key", "payload")
    kept = {chosen[key]: json.loads(bytes(payload)) for key, payload in rows}
    told = {each: document for each, document in kept.items() if document is not None}
    if not told:
        return None
    until = max(document["until"] for document in told.values())
    current = {each: document for each, document in told.items() if document["until"] == until}
    last = dt.date.fromisoformat(until)
    days = begins(last)
    counts = failures_by_component(days["quarter"], days["week"], last + dt.timedelta(days=1))
    missing = len(chosen) - len(kept) + len(told) - len(current)
    return Now(last, days["week"], days["quarter"], compared(current, counts), missing)


def compared(documents: dict[Component, dict[str, Any]], counts: dict[str, tuple[int, int]]) -> tuple[Seen, ...]:
    """Every component's week and quarter; all comparisons share one level, by Holm's rule."""
    from reliability.stats.unusual import tails, unusual_among

    pairs = [(each, stretch) for each in sorted(documents, key=lambda one: one.title) for stretch in STRETCHES]
    seen, found = [], []
    for component, stretch in pairs:
        quarter, week = counts.get(component.code, (0, 0))
        seen.append(week if stretch == "week" else quarter)
        found.append(tails(distribution_of(documents[component][stretch]["pmf"]), seen[-1]))
    called = unusual_among([each.two_sided for each in found], LEVEL)
    answers = []
    for (component, stretch), count, out, unusual in zip(pairs, seen, found, called, strict=True):
        told = documents[component][stretch]
        answers.append(
            Seen(
                component=component.code,
                title=component.title,
                stretch=stretch,
                begin=dt.date.fromisoformat(told["from"]),
                count=count,
                expected=told["expected"],
                low=told["band"][0],
                high=told["band"][1],
                chance=out.two_sided,
                more=out.high,
                unusual=bool(unusual),
                reported=told.get("reported", 1.0),
            )
        )
    return tuple(answers)
