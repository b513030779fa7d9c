"""The forecast as a document of plain values (files.md), with weeks, groupings, planned ones and what is left out."""

from __future__ import annotations

import datetime as dt
from collections import Counter
from collections.abc import Iterable, Sequence
from typing import TYPE_CHECKING, Any

from reliability.forecasts.horizon import week_starts
from reliability.forecasts.question import Question
from reliability.forecasts.site_rules import by_others
from reliability.risk_ages import round_ages
from reliability.running_parts import RunningParts, RunningRow

if TYPE_CHECKING:
    from reliability.forecasts.learned import Learned
    from reliability.forecasts.next_quarter import Tally
    from reliability.stats.count_results import Counts

GROUPINGS = ("part", "needed", "site", "type")
AGE_BANDS = 12


def written(
    question: Question, running: RunningParts, learned: Learned, tally: Tally, bands: Sequence[float]
) -> dict[str, Any]:
    """Totals, weeks and every grouping."""
    from reliability.forecasts.combine import told

    level = question.what_if.service_level

    def both(counts: Counts) -> dict[str, Any]:
        failures, used = (told(each, bands, level) for each in (counts.failures, counts.parts_used))
        return {**failures, "parts_used": used}

    starts = week_starts(question.days)[:-1]
    weeks = [
        {"from": (question.begin + dt.timedelta(days=start)).isoformat(), **told(counts, bands, level)}
        for start, counts in zip(starts, tally.weeks, strict=True)
    ]
    groups = {
        grouping: [{"group": label, **both(counts)} for label, counts in sorted(tally.groups[grouping].items())]
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
        "failures_seen": learned.failures,
        "counted": bool(learned.designs),
        "total": both(tally.total),
        "planned": told(tally.total.planned, bands, level),
        "weeks": weeks,
        "groups": groups,
        "age_profile": age_profile([row for row in running.rows if row.joins == 0]),
        "follows": sorted({(row.part, row.needed) for row in running.rows}),
        "left_out": [{"reason": reason, "count": count} for reason, count in running.left_out],
        "warnings": [
            *running.notes,
            *unvisited(question, learned),
            *by_others(running.rows, question, learned),
            *learned.warnings,
            *tally.warnings,
        ],
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


def unvisited(question: Question, learned: Learned) -> list[str]:
    """A warning that names sites among those asked for, and no others: a person may see some sites only."""
    sites = [site for site in learned.unvisited if question.sites is None or site in question.sites]
    if not sites:
        return []
    return [
        f"How often crews come to {', '.join(sites)} is not known: failures there count as found at once. "
        "Enter the days between visits of the site."
    ]
