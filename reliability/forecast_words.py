"""What a forecast says, in the sentences a manager reads."""

from __future__ import annotations

import datetime as dt
from typing import Any

from fleet.formats import counted, long_day, number, rounded
from reliability.forecasts.horizon import WEEK, WEEKS, next_quarter

Document = dict[str, Any]
USUAL_LEVEL = "0.95"


def about(mean: float) -> str:
    """An expected count as people say it: 334, 8.5, 0.6."""
    return number(mean, 0 if abs(mean) >= 20 else 1)


def between(band: list[Any]) -> str:
    """`308 to 361`, or the one value."""
    low, high = band
    return number(low) if low == high else f"{number(low)} to {number(high)}"


def plan_for(told: Document) -> int:
    """The quantity that is enough at the service level asked for."""
    return int(told["plan_for"][_level_of(told)])


def service_of(told: Document) -> str:
    """`95 of 100`"""
    return out_of(float(_level_of(told)))


def _level_of(told: Document) -> str:
    """The level asked for stands beside the usual one, if it is another."""
    return next((level for level in told["plan_for"] if level != USUAL_LEVEL), USUAL_LEVEL)


def out_of(share: float) -> str:
    """0.95 becomes `95 of 100`, 0.995 `995 of 1 000`."""
    hundred = round(100 * share, 6)
    return f"{hundred:.0f} of 100" if hundred == int(hundred) else f"{number(round(1000 * share))} of {number(1000)}"


def days_of(document: Document) -> tuple[dt.date, dt.date]:
    """First and last day that is counted."""
    begin = dt.date.fromisoformat(document["from"])
    return begin, begin + dt.timedelta(days=document["days"] - 1)


def is_next_quarter(document: Document) -> bool:
    begin, _ = days_of(document)
    usual = next_quarter(dt.date.fromisoformat(document["as_of"]))
    return begin == usual and document["days"] == WEEKS * WEEK


def stretches(document: Document) -> str:
    """What a hundred of them are counted in: quarters, or stretches of as many days."""
    return "quarters" if document["days"] == WEEKS * WEEK else "such stretches"


def heading(document: Document) -> str:
    begin, end = days_of(document)
    as_of = dt.date.fromisoformat(document["as_of"])
    return f"{long_day(begin)} to {long_day(end)}, from the records of {long_day(as_of)}"


def lead(document: Document, name: str) -> str:
    """How many will fail, how sure that is, and how many are enough."""
    total, used = document["total"], document["total"]["parts_used"]
    enough = f"Having {counted(plan_for(used), 'part')} is enough in {service_of(used)}."
    if document["positions"] == 0:
        return f"No {name} runs in the field, so none can fail."
    if not document["counted"]:
        return f"No life of a {name} is on record yet. We cannot tell."
    if document["failures_seen"] == 0:
        most_likely = between([total["median"], total["median"]])
        return f"No {name} has failed so far. Most likely {most_likely} will fail. {enough}"
    band = "0.8" if "0.8" in total["bands"] else next(iter(total["bands"]))
    return (
        f"About {about(total['mean'])} {plural(name)} will fail ({out_of(float(band))} {stretches(document)}: "
        f"{between(total['bands'][band])}). {enough}"
    )


def plural(name: str) -> str:
    return name if name.endswith("s") else f"{name}s"


def weekly(document: Document, name: str) -> str:
    means = [week["mean"] for week in document["weeks"]]
    bands = [week["bands"]["0.8"] for week in document["weeks"]]
    if not means:
        return ""
    low, high = min(band[0] for band in bands), max(band[1] for band in bands)
    digits = 0 if max(means) >= 20 else 1
    least, most = number(min(means), digits), number(max(means), digits)
    expected = f"about {most}" if least == most else f"from {least} to {most}"
    return (
        f"{plural(name).capitalize()} failing a week: {expected} expected; "
        f"in 80 of 100 weeks between {number(low)} and {number(high)}."
    )


def positions(document: Document) -> str:
    """What is counted and what is not."""
    out = [f"{counted(row['count'], 'part')} {row['reason']}" for row in document["left_out"]]
    left = f" Not counted: {', '.join(out)}." if out else ""
    return f"{counted(document['positions'], 'part')} in service.{left}"


def ages(document: Document, name: str) -> str:
    """How old the fleet is: the band of ages by which half of the parts lie."""
    profile = sorted(document["age_profile"], key=lambda row: row["age_from"])
    total = sum(row["count"] for row in profile)
    if not total:
        return f"No {name} runs in the field."
    seen, half = 0, profile[-1]
    for row in profile:
        seen += row["count"]
        if 2 * seen >= total:
            half = row
            break
    clock, oldest = document["clock"], profile[-1]
    many = sum(row["count"] for row in profile if row["age_from"] == oldest["age_from"])
    old = "is" if many == 1 else "are"
    return (
        f"Half of the {number(total)} {plural(name)} in service are younger than {number(half['age_to'], 0)} {clock}; "
        f"{number(many)} {old} older than {number(oldest['age_from'], 0)}."
    )


def age(value: float, clock: str) -> str:
    """`45 days`, `61 000 strokes`"""
    return f"{number(rounded(value, 2 if clock != 'days' else 3), 0 if value >= 10 else 1)} {clock}"
