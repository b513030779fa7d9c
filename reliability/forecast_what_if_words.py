"""What is assumed and what it changes, in the sentences a manager reads."""

from __future__ import annotations

from typing import Any

from fleet.formats import long_day, number
from reliability.forecast_words import about, age, between, days_of, out_of, plan_for, plural, service_of
from reliability.forecasts.what_if import WhatIf

Document = dict[str, Any]


def assumed(what_if: WhatIf, clock: str) -> str:
    """`use times 1.2, replaced as planned at 45 days, N4 from 1 February 2027 with 12 working ones changed a week`"""
    said = []
    if what_if.duty != 1.0:
        said.append(f"use times {what_if.duty:g}")
    if what_if.replace_at is not None:
        said.append(f"replaced as planned at {age(what_if.replace_at, clock)}")
    if what_if.superseding is not None:
        since = f" from {long_day(what_if.superseding_from)}" if what_if.superseding_from else ""
        pace = what_if.retrofit_a_week
        fitted = f" with {number(pace)} working ones changed a week" if pace else " where a part is due anyway"
        said.append(f"{what_if.superseding}{since}{fitted}")
    return ", ".join(said)


def fewer(told: Document, band: str = "0.8") -> str:
    """`61 fewer (38 to 85 fewer in 80 of 100)`; where the band holds nothing at all, so it is said."""
    mean, (low, high) = told["mean"], told["bands"][band]
    if abs(mean) < 0.05 and low == high == 0:
        return "no change"
    word = "fewer" if mean < 0 else "more"
    amount = about(abs(mean))
    return f"{amount} {word} ({between_changes(low, high)} in {out_of(float(band))})"


def between_changes(low: float, high: float) -> str:
    if high <= 0:
        return f"{between([-high, -low])} fewer"
    if low >= 0:
        return f"{between([low, high])} more"
    return f"from {number(-low)} fewer to {number(high)} more"


def change(document: Document, base: Document, difference: Document, what_if: WhatIf, name: str) -> str:
    """The what-if in one sentence: what is assumed, how many fewer fail, and what planned replacement takes for it."""
    _, end = days_of(document)
    said = assumed(what_if, document["clock"])
    words = f"{said[:1].upper()}{said[1:]}: {fewer(difference)} {plural(name)} failing by {long_day(end)}."
    words += planned_instead(document["planned"], base["planned"])
    used, had = document["total"]["parts_used"], base["total"]["parts_used"]
    more = plan_for(used) - plan_for(had)
    if more:
        so_many = f"{number(abs(more))} {'more' if more > 0 else 'fewer'}"
        words += f" To have enough in {service_of(used)}: {number(plan_for(used))} parts, {so_many} than without."
    else:
        words += f" The {number(plan_for(used))} parts that are enough in {service_of(used)} stay the same."
    return words


def planned_instead(planned: Document, before: Document) -> str:
    """Working parts that would be changed, where that is another number than now; empty otherwise."""
    if abs(planned["mean"] - before["mean"]) < 0.5:
        return ""
    instead = f" instead of {about(before['mean'])}" if before["mean"] >= 0.05 else ""
    return (
        f" About {about(planned['mean'])} would be changed while they still work "
        f"({between(planned['bands']['0.8'])}){instead}."
    )


def of_kept(question: Document) -> WhatIf:
    """What a kept forecast assumed."""
    return WhatIf.from_told(question.get("what_if") or {})
