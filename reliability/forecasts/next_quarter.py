"""Failures and parts used in a coming stretch of days, from the records: the document of the forecast.

Each design of a component has its own posterior from its own lives, with what sites differ in; a part that fails is
followed by the design that its site fits now. What else the records teach (removals by chance, planned replacement,
visits, duty, modules that stand still, leave or join) is in `learned.py` and `positions.py`; the count itself, in one
pass from the same draws, in `count.py`. Where whole weeks are asked for, the count begins a whole number of weeks
before them: at most three days from the as-of day, with the ages of that day; on a grid of weeks it costs a tenth.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

from fleet.models import Component, Part
from reliability.forecasts.count import LABELS, count
from reliability.forecasts.horizon import week_starts
from reliability.forecasts.learned import Learned, learned, learned_from
from reliability.forecasts.positions import positions_of
from reliability.forecasts.question import Question, question_of
from reliability.forecasts.season import season_of
from reliability.forecasts.taken_along import Trigger, parts_taken
from reliability.forecasts.written import written
from reliability.kept import kept
from reliability.life_errors import NothingNamed
from reliability.lifetimes_from_fleet import lives
from reliability.running_parts import RunningParts, running_parts

if TYPE_CHECKING:
    from reliability.fleet_lives import FleetLives
    from reliability.stats.count_results import CountDistribution, CountForecast, Counts

__all__ = ["Question", "forecast_distributions", "forecast_document", "question_of"]

BANDS = (0.5, 0.8, 0.95)
NO_LIFE = "No life is on record yet, so nothing can be expected. Log what goes in and out first."
DAYS_KNOW_NO_DUTY = "Lives are counted in days here, so that another duty changes nothing."


@dataclass(frozen=True)
class Distributions:
    """What a forecast says of all failures and parts used, and what it was made from."""

    failures: CountDistribution
    parts_used: CountDistribution
    running: RunningParts
    found: FleetLives


@dataclass
class Tally:
    """Counts in total and by grouping and label, failures by week."""

    total: Counts
    weeks: list[CountDistribution]
    groups: dict[str, dict[str, Counts]]
    warnings: list[str] = field(default_factory=list)


def forecast_document(question: Question, *, bands: Sequence[float] = BANDS) -> dict[str, Any]:
    """Totals, weeks and every grouping, as plain values."""
    running, taught = running_now(question), learned(question.component, question.as_of, question.known_on)
    tally = tallied(question, running, taught)
    return written(question, running, taught, tally, bands)


def forecast_distributions(question: Question) -> Distributions:
    """The whole distributions of the totals, to be judged by what happened."""
    component, as_of, known_on = question.component, question.as_of, question.known_on
    running = running_now(question)
    found = lives(component, by="part", as_of=as_of, known_on=known_on)
    total = tallied(question, running, learned_from(found, component, as_of, known_on)).total
    return Distributions(total.failures, total.parts_used, running, found)


def running_now(question: Question) -> RunningParts:
    """What runs where the question asks."""
    sites = None if question.sites is None else list(question.sites)
    return running_parts(question.component, as_of=question.as_of, sites=sites, known_on=question.known_on)


def tallied(question: Question, running: RunningParts, taught: Learned) -> Tally:
    """The count itself: what comes of what runs and what its lives teach."""
    checked(question)
    warnings = []
    if question.what_if.duty != 1.0 and question.component.clock == "days":
        warnings.append(DAYS_KNOW_NO_DUTY)
    warnings += _season(question, taught)
    if not running.rows or not taught.designs:
        return _nothing(question, [*warnings, *([NO_LIFE] if running.rows else [])])
    if any(row.part not in taught.designs for row in running.rows) or _assumed_unknown(question, taught):
        warnings += _borrowed(question, running, taught)
    found = count(question, taught, positions_of(running.rows, question, taught))
    tally = _tally(found, warnings)
    for trigger in taught.triggers:
        _add_taken(tally, trigger, question)
    return tally


def _season(question: Question, taught: Learned) -> list[str]:
    factor = taught.duty.factor(question.span) * season_of(question, taught.duty).whole
    if abs(factor - 1.0) < 0.02:
        return []
    return [
        f"These days count with {factor:.2f} times the use a day of the past 90, as the same season had in earlier "
        "years."
    ]


def checked(question: Question) -> None:
    """Refuses a superseding part that the component does not have."""
    assumed = question.what_if.superseding
    if assumed is not None:
        known = list(Part.objects.filter(component=question.component).values_list("code", flat=True))
        if assumed not in known:
            raise NothingNamed("part", assumed, known)


def _assumed_unknown(question: Question, taught: Learned) -> bool:
    assumed = question.what_if.superseding
    return assumed is not None and assumed not in taught.designs


def _borrowed(question: Question, running: RunningParts, taught: Learned) -> list[str]:
    parts = {name for row in running.rows for name in (row.part, row.needed)} | {question.what_if.superseding}
    return [
        f"No life of {part} is on record yet: it counts as the {question.component.code} parts so far."
        for part in sorted(name for name in parts if name is not None and name not in taught.designs)
    ]


def _nothing(question: Question, warnings: list[str]) -> Tally:
    import numpy as np

    from reliability.stats.count_results import CountDistribution, Counts

    none = CountDistribution(np.array([1.0]))
    weeks = [none for _ in week_starts(question.days)[1:]]
    return Tally(Counts(none, none, none), weeks, {name: {} for name in LABELS}, warnings)


def _tally(found: CountForecast, warnings: list[str]) -> Tally:
    groups = dict(zip(LABELS, (found.by_group, *found.by_also), strict=True))
    return Tally(found, [week.failures for week in found.by_window], groups, warnings)


def _add_taken(tally: Tally, trigger: Trigger, question: Question) -> None:
    """Parts taken along with the failures of another component, on top of those already counted."""
    from dataclasses import replace

    from reliability.forecasts.combine import add_up
    from reliability.stats.count_results import CountDistribution, Counts

    other = question_of(
        Component.objects.get(code=trigger.component),
        begin=question.begin,
        days=question.days,
        as_of=question.as_of,
        sites=question.sites,
        known_on=question.known_on,
    )
    if question.component.clock != "days":
        other = replace(other, what_if=replace(other.what_if, duty=question.what_if.duty))
    failing = kept("forecast triggers", other.asked(), lambda: _failing(other))

    def more(counts: Counts, failures: list[float], share: float) -> Counts:
        taken = CountDistribution(parts_taken(trigger, failures, share, coming=failing["designs"]))
        return Counts(counts.failures, add_up([counts.parts_used, taken]), counts.planned)

    whole = tally.total.failures.mean + 1e-9
    tally.total = more(tally.total, failing["total"], 1.0)
    for grouping in ("site", "type"):
        own, others = tally.groups[grouping], failing[grouping]
        own.update({label: more(own[label], others[label], 1.0) for label in own if label in others})
    for grouping in ("part", "needed"):
        own = tally.groups[grouping]
        # which design is hit goes by how many of them run
        for label, counts in own.items():
            own[label] = more(counts, failing["total"], min(1.0, counts.failures.mean / whole))


def _failing(other: Question) -> dict[str, Any]:
    """Probabilities of 0, 1, 2 ... failures of a component, in total and by site and type; how many of each design."""
    tally = tallied(other, running_now(other), learned(other.component, other.as_of, other.known_on))
    by_label = {
        name: {str(label): counts.failures.pmf.tolist() for label, counts in tally.groups[name].items()}
        for name in ("site", "type")
    }
    designs = {str(label): counts.failures.mean for label, counts in tally.groups["part"].items()}
    return {"total": tally.total.failures.pmf.tolist(), "designs": designs, **by_label}
