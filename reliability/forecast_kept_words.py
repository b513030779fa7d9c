"""What became of a kept forecast, in the sentences a manager reads."""

from __future__ import annotations

from typing import Any

from fleet.formats import counted, number
from reliability.forecast_words import about, between, out_of, plural

Document = dict[str, Any]
BANDS = ("0.5", "0.8", "0.95")
METHOD = (
    "A band of whole counts holds a little more than its name says, the more so where few fail: 80 in 100 is often 85 "
    "to 90. Weeks are not independent: a fleet that wears faster than expected lies above in many weeks together."
)


def inside(week: Document, count: int, band: str) -> bool:
    low, high = week["bands"][band]
    return bool(low <= count <= high)


def held_by(week: Document, count: int) -> str:
    """The narrowest band that holds the count: `50 in 100`, or where it lies outside of all."""
    for band in BANDS:
        if band in week["bands"] and inside(week, count, band):
            return out_of(float(band)).replace(" of ", " in ")
    return "above all" if count > week["mean"] else "below all"


def verdict(document: Document, counts: list[int], name: str) -> str:
    """How many weeks lay inside."""
    if not counts:
        return "No whole week of it has passed yet. This page fills as the weeks pass."
    weeks = document["weeks"][: len(counts)]
    held = {band: sum(inside(week, count, band) for week, count in zip(weeks, counts, strict=True)) for band in BANDS}
    of = "The one week" if len(counts) == 1 else f"Of {counted(len(counts), 'week')}"
    if len(counts) == 1:
        where = "inside" if held["0.8"] else "outside"
        return f"{of} that has passed lay {where} the 80 in 100 band: {number(counts[0])} {plural(name)} failed."
    return (
        f"{of} that have passed, {number(held['0.8'])} lay inside the 80 in 100 band, {number(held['0.5'])} inside the "
        f"50 and {number(held['0.95'])} inside the 95 in 100 band. About {number(0.8 * len(counts), 0)} of them inside "
        "the 80 in 100 band is what is to be expected."
    )


def still_coming(weeks: int, late: int, days: int) -> str:
    """That the last weeks may not be whole yet. weeks: passed; late: of them so fresh that failures may still come;
    days: within which most failures reach the book.
    """
    if not weeks or not late:
        return ""
    said = f"Of the past year's failures 95 in 100 were in the book within {counted(days, 'day')}"
    if late >= weeks:
        return f"{said}: more may still come for {'this week' if weeks == 1 else 'every week so far'}."
    which = "the last week" if late == 1 else f"the last {counted(late, 'week')}"
    return f"{said}: more may still come for {which}."


def total_so_far(document: Document, counts: list[int], name: str) -> str:
    """All of it beside all that happened; only the whole stretch has a band of its own."""
    if not counts:
        return ""
    came, total = sum(counts), document["total"]
    if len(counts) == len(document["weeks"]):
        low, high = total["bands"]["0.8"]
        where = "inside" if low <= came <= high else ("above" if came > high else "below")
        return (
            f"In all {number(came)} {plural(name)} failed; {about(total['mean'])} were expected. That lies {where} "
            f"the 80 in 100 band, {between([low, high])}."
        )
    expected = sum(week["mean"] for week in document["weeks"][: len(counts)])
    return f"So far {number(came)} {plural(name)} failed; {about(expected)} were expected by now."
