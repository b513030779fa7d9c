"""Whether this week and this quarter are unusual, in the sentences a manager reads on Today."""

from __future__ import annotations

import datetime as dt
from typing import Any

from fleet.formats import counted, long_day, number
from reliability.forecasts.expected_now import LATE, LEVEL, ODD, STRETCHES, Now, Seen

SINCE = {"week": "since {day}", "quarter": "this quarter, since {day}"}
STALE_DAYS = 1  # the worker counts at night: yesterday's figures are still the latest until then


def told(now: Now | None, today: dt.date) -> dict[str, Any]:
    """`answer`, `unusual` and `odd` sentences, `note`, and the figures as columns and rows."""
    if now is None:
        return {"answer": "", "note": NOTHING_KEPT}
    unusual = [sentence(each) for each in now.seen if each.unusual]
    odd = [sentence(each) for each in now.seen if each.odd and not each.unusual]
    return {
        "answer": answer(now, len(unusual)),
        "unusual": unusual,
        "odd": odd,
        "odd_note": odd_note(len(odd) + len(unusual) if odd else 0, len(now.seen)),
        "note": note(now, today),
        **table(now),
    }


NOTHING_KEPT = "What was to be expected was not counted yet. The program does so once a day."


def answer(now: Now, unusual: int) -> str:
    """Yes or no to the question of the heading."""
    if not now.seen:
        return "Nothing can be expected of these days yet."
    components = len({each.component for each in now.seen})
    if unusual == 0:
        return f"No: of {counted(components, 'component')} none failed unusually often or seldom."
    return f"Yes, {counted(unusual, 'figure')} of {number(len(now.seen))}:"


def sentence(each: Seen) -> str:
    """What failed, beside what was expected."""
    since = SINCE[each.stretch].format(day=long_day(each.begin))
    band = number(each.low) if each.low == each.high else f"{number(each.low)} to {number(each.high)}"
    if each.reported < LATE:
        late = f" Of all failures of these days about {100 * each.reported:.0f} in 100 are usually in the book by now."
        known = "in the book by now "
    else:
        late, known = "" if each.more else " Reports may still come in.", ""
    return (
        f"{each.title.capitalize()}: {counted(each.count, 'failure')} {since}, where {band} were to be expected "
        f"{known}(80 in 100).{late}"
    )


def odd_note(out: int, figures: int) -> str:
    """How many figures, unusual ones among them, would be so far out by chance alone."""
    from reliability.stats.hits import ordinary_hits

    if not out:
        return ""
    most = ordinary_hits([ODD] * figures).high
    if out <= most:
        return f"Among {number(figures)} figures up to {number(most)} so far out are ordinary: worth a look, no alarm."
    return (
        f"Among {number(figures)} figures up to {number(most)} so far out would be ordinary, and {number(out)} are. "
        "Either much has changed at once, or the forecasts are less sure than they say."
    )


def note(now: Now, today: dt.date) -> str:
    """The rule, and how fresh the figures are."""
    rule = (
        f"Unusual is what would come up on fewer than {100 * LEVEL:.0f} day in 100 among all {number(len(now.seen))} "
        "figures together, if every forecast were right. Each forecast is the one of the evening before the week or "
        "the quarter began, less what usually has not reached the book yet."
    )
    fresh = "" if now.until >= today else f" Counted up to {long_day(now.until)}"
    if fresh:
        late = (today - now.until).days > STALE_DAYS
        fresh += ": the daily count has not run since." if late else "; today is counted by the next round."
    missing = f" {counted(now.missing, 'component')} could not be compared." if now.missing else ""
    return f"{rule}{fresh}{missing}"


def table(now: Now) -> dict[str, Any]:
    """One line a component."""
    columns = [{"key": "component", "label": "Component"}]
    for stretch, label in (("week", "This week"), ("quarter", "This quarter")):
        columns += [
            {"key": stretch, "label": label, "numeric": True},
            {"key": f"{stretch}_band", "label": "Expected, 80 in 100", "numeric": True},
        ]
    rows: dict[str, list[Any]] = {}
    for each in now.seen:
        row = rows.setdefault(
            each.component, [{"text": each.title, "url": f"/forecast/?component={each.component}"}, *[None] * 4]
        )
        place = 1 + 2 * STRETCHES.index(each.stretch)
        row[place] = {"text": number(each.count), "sub": verdict(each), "strong": each.unusual}
        row[place + 1] = number(each.low) if each.low == each.high else f"{number(each.low)} to {number(each.high)}"
    return {"columns": columns, "rows": list(rows.values())}


def verdict(each: Seen) -> str:
    if each.unusual:
        return "unusually many" if each.more else "unusually few"
    return ("more than usual" if each.more else "fewer than usual") if each.odd else ""
