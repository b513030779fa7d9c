"""The forecast as a document of plain values (files.md), with weeks, groupings, planned ones and what is left out."""

from __future__ import annotations

import datetime as dt
from collections import Counter, defaultdict
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

from reliability.forecasts.horizon import week_starts
from reliability.forecasts.question import Question
from reliability.risk_ages import round_ages
from reliability.running_parts import RunningParts, RunningRow

if TYPE_CHECKING:
    from reliability.forecasts.learned import Learned
    from reliability.stats.counts import CountDistribution, Counts

GROUPINGS = ("part", "needed", "site", "type")
AGE_BANDS = 12


@dataclass
class Tallies:
    """Independent counts waiting to be added up: failures and parts used by grouping and label, failures by week."""

    weeks: list[list[CountDistribution]]
    failures: dict[str, dict[str, list[CountDistribution]]] = field(default_factory=lambda: defaultdict(dict))
    used: dict[str, dict[str, list[CountDistribution]]] = field(default_factory=lambda: defaultdict(dict))
    planned: list[CountDistribution] = field(default_factory=list)

    def add(self, grouping: str, label: str, counts: Counts) -> None:
        self.failures[grouping].setdefault(label, []).append(counts.failures)
        self.used[grouping].setdefault(label, []).append(counts.parts_used)
        if grouping == "total":
            self.planned.append(counts.planned)


def written(
    question: Question, running: RunningParts, learned: Learned, tallies: Tallies, bands: Sequence[float]
) -> dict[str, Any]:
    """Totals, weeks and every grouping."""
    from reliability.forecasts.combine import add_up, told

    level = question.what_if.service_level

    def both(grouping: str, label: str) -> dict[str, Any]:
        failures = told(add_up(tallies.failures[grouping].get(label, [])), bands, level)
        return {**failures, "parts_used": told(add_up(tallies.used[grouping].get(label, [])), bands, level)}

    starts = week_starts(question.days)[:-1]
    weeks = [
        {"from": (question.begin + dt.timedelta(days=start)).isoformat(), **told(add_up(counts), bands, level)}
        for start, counts in zip(starts, tallies.weeks, strict=True)
    ]
    groups = {
        grouping: [{"group": label, **both(grouping, label)} for label in sorted(tallies.failures[grouping])]
        for grouping in GROUPINGS
    }
    return {
        "from": question.begin.isoformat(),
        "days": question.days,
        "as_of": question.as_of.isoformat(),
        "component": question.component.code,
        "clock": question.component.clock,
        "sites": None if question.sites is None else list(question.sites),
        "what_if": question.what_if.told(),
        "positions": running.count,
        "failures_seen": learned.failures(),
        "counted": learned.found.lifetimes is not None,
        "total": both("total", ""),
        "planned": told(add_up(tallies.planned), bands, level),
        "weeks": weeks,
        "groups": groups,
        "age_profile": age_profile(running.rows),
        "follows": sorted({(row.part, row.needed) for row in running.rows}),
        "left_out": [{"reason": reason, "count": count} for reason, count in running.left_out],
        "warnings": [*running.notes, *learned.warnings],
    }


def age_profile(rows: Iterable[RunningRow]) -> list[dict[str, Any]]:
    """How many parts of each design are how old now, in bands of round ages; bands without a part are left out."""
    listed = list(rows)
    edges = round_ages(max((row.age for row in listed), default=0.0), AGE_BANDS)
    step = edges[1] - edges[0] if len(edges) > 1 else 1.0
    counts: Counter[tuple[str, int]] = Counter()
    for row in listed:
        counts[row.part, int(row.age // step)] += row.count
    return [
        {"part": part, "age_from": band * step, "age_to": (band + 1) * step, "count": count}
        for (part, band), count in sorted(counts.items())
    ]
