"""What a forecast says, in the sentences a manager reads."""

from __future__ import annotations

import datetime as dt
from typing import Any

from fleet.formats import counted, long_day, number


def about(mean: float) -> str:
    """An expected count as people say it: 334, 8.5, 0.6."""
    return number(mean, 0 if mean >= 20 else 1)


def between(band: list[int]) -> str:
    """`308 to 361`, or the one value."""
    low, high = band
    return number(low) if low == high else f"{number(low)} to {number(high)}"


def days_of(document: dict[str, Any]) -> tuple[dt.date, dt.date]:
    """First and last day that is counted."""
    begin = dt.date.fromisoformat(document["from"])
    return begin, begin + dt.timedelta(days=document["days"] - 1)


def heading(document: dict[str, Any]) -> str:
    begin, end = days_of(document)
    as_of = dt.date.fromisoformat(document["as_of"])
    return f"{long_day(begin)} to {long_day(end)}, from the records of {long_day(as_of)}"


def lead(document: dict[str, Any], name: str) -> str:
    """How many will fail, how sure that is, and how many are enough."""
    total, used = document["total"], document["total"]["parts_used"]
    if document["positions"] == 0:
        return f"No {name} runs in the field, so none can fail."
    if not document["counted"]:
        return f"No life of a {name} is on record yet. We cannot tell."
    if document["failures_seen"] == 0:
        return (
            f"No {name} has failed so far. Most likely {between([total['median'], total['median']])} will fail; "
            f"having {number(used['plan_for']['0.95'])} is enough in 95 of 100 such stretches."
        )
    band = "0.8" if "0.8" in total["bands"] else next(iter(total["bands"]))
    return (
        f"About {about(total['mean'])} {plural(name)} will fail ({100 * float(band):.0f} of 100 such stretches: "
        f"{between(total['bands'][band])}). Having {number(used['plan_for']['0.95'])} parts is enough in 95 of 100."
    )


def plural(name: str) -> str:
    return name if name.endswith("s") else f"{name}s"


def weekly(document: dict[str, Any], name: str) -> str:
    means = [week["mean"] for week in document["weeks"]]
    bands = [week["bands"]["0.8"] for week in document["weeks"]]
    if not means:
        return ""
    low, high = min(band[0] for band in bands), max(band[1] for band in bands)
    return (
        f"{plural(name).capitalize()} failing a week: from {about(min(means))} to {about(max(means))} expected; "
        f"in 80 of 100 weeks between {number(low)} and {number(high)}."
    )


def positions(document: dict[str, Any]) -> str:
    """What is counted and what is not."""
    out = [f"{counted(row['count'], 'part')} {row['reason']}" for row in document["left_out"]]
    left = f" Not counted: {', '.join(out)}." if out else ""
    return f"{counted(document['positions'], 'part')} in service.{left}"
