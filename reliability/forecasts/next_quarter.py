"""Failures and parts used in a coming stretch of days, from the records: the document of the forecast.

Each design of a component has its own posterior from its own lives, with what sites differ in; a part that fails is
followed by the design that its site fits now. Removals for other reasons end a life too. Where whole weeks are asked
for, the count begins a whole number of weeks before them: at most three days from the as-of day, with the ages of that
day; on a grid of weeks it costs a tenth. Counts: `reliability.stats.counts`.
"""

from __future__ import annotations

import math
from collections import defaultdict
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from reliability.forecasts.horizon import week_starts
from reliability.forecasts.learned import Learned
from reliability.forecasts.question import Question, question_of
from reliability.forecasts.what_if import NotCountedYet
from reliability.forecasts.written import Tallies, written
from reliability.lifetimes_from_fleet import lives
from reliability.running_parts import RunningParts, RunningRow, running_parts

if TYPE_CHECKING:
    from reliability.fleet_lives import FleetLives
    from reliability.stats.counts import CountDistribution, CountForecast

__all__ = ["Question", "forecast_distributions", "forecast_document", "question_of"]

BANDS = (0.5, 0.8, 0.95)
FEW_FAILURES, MANY_DRAWS, FEW_DRAWS = 20, 400, 100
AGE_CELLS = 60  # ages are told apart to this share of the typical life
PACE_STEP = 0.12  # paces are told apart to this share


@dataclass(frozen=True)
class Distributions:
    """What a forecast says of all failures and parts used, and what it was made from."""

    failures: CountDistribution
    parts_used: CountDistribution
    running: RunningParts
    found: FleetLives


def forecast_document(question: Question, *, bands: Sequence[float] = BANDS) -> dict[str, Any]:
    """Totals, weeks and every grouping, as plain values."""
    running, learned, tallies = tallied(question)
    if running.rows and learned.found.lifetimes is None:
        learned.warnings.append("No life is on record yet, so nothing can be expected. Log what goes in and out first.")
    return written(question, running, learned, tallies, bands)


def forecast_distributions(question: Question) -> Distributions:
    """The whole distributions of the totals, to be judged by what happened."""
    from reliability.forecasts.combine import add_up

    running, learned, tallies = tallied(question)
    failures, used = (add_up(each["total"].get("", [])) for each in (tallies.failures, tallies.used))
    return Distributions(failures, used, running, learned.found)


def tallied(question: Question) -> tuple[RunningParts, Learned, Tallies]:
    """The count itself: what runs, what its lives teach, and what comes of both."""
    if not question.what_if.is_base:
        raise NotCountedYet("This assumption is not counted yet.")
    sites = None if question.sites is None else list(question.sites)
    as_of, known_on = question.as_of, question.known_on
    running = running_parts(question.component, as_of=as_of, sites=sites, known_on=known_on)
    learned = Learned(lives(question.component, by="part", as_of=as_of, known_on=known_on))
    tallies = Tallies([[] for _ in week_starts(question.days)[1:]])
    pairs: dict[tuple[str, str], list[RunningRow]] = defaultdict(list)
    for row in running.rows:
        pairs[row.part, row.needed].append(row)
    for (part, needed), rows in sorted(pairs.items()):
        count_part(question, learned, needed, part, rows, tallies)
    return running, learned, tallies


def count_part(
    question: Question, learned: Learned, needed: str, part: str, rows: list[RunningRow], tallies: Tallies
) -> None:
    """Counts the positions that hold one design now and get another (or the same) when it fails."""
    posterior = learned.posterior(part)
    if posterior is None:
        return
    following = learned.posterior(needed) if needed != part else None
    scale = typical_life(posterior)
    merged = merge_rows(rows, scale / AGE_CELLS if scale else 1.0, question.shift)
    rate = learned.other_removals(part)
    few = min(learned.failures(part), learned.failures(needed)) < FEW_FAILURES

    spread = posterior.has_spread or (following is not None and following.has_spread)

    def count(windows: list[int], group_window: int | None, label: str | None) -> CountForecast:
        import numpy as np

        from reliability.stats.counts import forecast_counts

        return forecast_counts(
            posterior,
            np.array([row.age for row in merged]),
            np.array([row.a_day * question.span for row in merged]),
            weights=np.array([row.count for row in merged], dtype=float),
            sites=[row.site for row in merged] if spread else None,
            groups=[getattr(row, label) for row in merged] if label else None,
            windows=windows,
            group_window=group_window,
            other_removals=rate,
            next_posterior=following,
            switch_at=0.0 if following is not None else None,
            draws=MANY_DRAWS if few else FEW_DRAWS,
            rng=np.random.default_rng(question.seed(part)),
        )

    whole = [0, question.span] if question.gap == 0 else [0, question.gap, question.span]
    last = len(whole) - 2
    by_site = count(whole, last, "site")
    tallies.add("total", "", by_site.by_window[last])
    tallies.add("part", part, by_site.by_window[last])
    tallies.add("needed", needed, by_site.by_window[last])
    for site, counts in by_site.by_group.items():
        tallies.add("site", str(site), counts)
    if question.by_type:
        for kind, counts in count(whole, last, "type").by_group.items():
            tallies.add("type", str(kind), counts)
    starts = [question.gap + start for start in week_starts(question.days)]
    weekly = count(starts if question.gap == 0 else [0, *starts], None, None).by_window
    for week, counts in zip(tallies.weeks, weekly[-len(tallies.weeks) :], strict=True):
        week.append(counts.failures)


def typical_life(posterior: Any) -> float:
    """The middle of the posterior's scale."""
    import numpy as np

    return float(np.median(posterior.draws(50, np.random.default_rng(0)).scales))


def merge_rows(rows: list[RunningRow], cell: float, shift: int = 0) -> list[RunningRow]:
    """Rows of about equal age (`shift` days later) and pace as one: the cost grows with the number of distinct ages."""
    merged: dict[tuple[Any, ...], int] = defaultdict(int)
    for row in rows:
        if row.a_day <= 0:
            continue
        age = round(max(0.0, row.age + shift * row.a_day) / cell) * cell
        pace = math.exp(round(math.log(row.a_day) / PACE_STEP) * PACE_STEP)
        merged[age, pace, row.part, row.needed, row.site, row.type] += row.count
    return [RunningRow(*key, count) for key, count in sorted(merged.items())]
