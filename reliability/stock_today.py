"""What Today says of stores and bench from estimates that were made before: it reads and computes nothing."""

from __future__ import annotations

import datetime as dt
from typing import Any

from fleet.formats import percent, short_day
from fleet.rights import BENCH, STOCK, may

MOST = 6
LIKELY = 0.05


def running_out(person: Any, today: dt.date) -> list[dict[str, Any]]:
    """Parts that may well run out before the next delivery, the likeliest first; for those who see every store."""
    if not (may(person, STOCK) and person.all_sites):
        return []
    from reliability.forecasts.kept_order import last_document

    document = last_document(today)
    if document is None:
        return []
    lines = [line for line in document["lines"] if line["known"] and line["chance_before_delivery"] > LIKELY]
    lines.sort(key=lambda line: -line["chance_before_delivery"])
    return [told(line) for line in lines[:MOST]]


def told(line: dict[str, Any]) -> dict[str, Any]:
    day = line["tell_on"]
    return {
        "part": line["part"],
        "name": line["name"],
        "on_hand": line["on_hand"],
        "due": line["due"],
        "chance": percent(min(max(line["chance_before_delivery"], 1e-9), 1 - 1e-9)),
        "day": short_day(dt.date.fromisoformat(day), dt.date.fromisoformat(day).year) if day else "",
    }


def bench_ahead(person: Any, today: dt.date) -> list[str]:
    """How the bench stands against its target: where the backlog goes, and what would hold it."""
    if not may(person, BENCH):
        return []
    from reliability.forecasts.bench_records import sees_whole_bench
    from reliability.forecasts.kept_backlog import last_bench_document

    document = last_bench_document(today)
    if document is None or not sees_whole_bench(person):
        return []
    return [sentence for sentence in (document["ends_sentence"], document["target_sentence"]) if sentence]
