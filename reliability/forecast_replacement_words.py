"""Whether planned replacement pays, at which age, and what it would mean, in the sentences a manager reads."""

from __future__ import annotations

from typing import Any

from fleet.formats import number, percent, rounded
from reliability.forecast_words import about, age, between, out_of, plural

Document = dict[str, Any]


def money(amount: float, currency: str) -> str:
    return f"{number(rounded(amount, 3), 0 if amount >= 10 else 2)} {currency}"


def lead(document: Document, name: str, currency: str) -> str:
    """The answer in one to three sentences."""
    part, clock, told = document["part"], document["clock"], document["told"]
    if told is None:
        return nothing_known(document, name)
    if document["failure_cost"] <= document["planned_cost"]:
        return (
            "Planned replacement cannot pay: a failure costs no more than a planned replacement. "
            f"Waiting for failures costs about {money(told['never'], currency)} a quarter."
        )
    if told["age"] is None:
        return (
            f"Planned replacement cannot pay, as far as the records tell: a {part} that has worked long fails no "
            f"sooner than a new one, or too little sooner. Waiting for failures costs about "
            f"{money(told['never'], currency)} a quarter."
        )
    low, high = told["saving_band"]
    best = age(told["age"], clock)
    if not told["pays"]:
        worse = f"may also cost {percent(-low)} more" if low < 0 else "may also save nothing"
        return (
            f"The records do not show yet that planned replacement pays. At {best}, the age that looks best, it "
            f"would save about {percent(told['saving'])}, but {worse} (in {out_of(told['level'])}: "
            f"{signed_percent(low)} to {signed_percent(high)})."
        )
    return (
        f"Replacing {plural(name)} as planned at {best} costs least: about {money(told['cost'], currency)} a quarter "
        f"instead of {money(told['never'], currency)} for waiting until they fail. That is {percent(told['saving'])} "
        f"less; we are {percent(told['level'])} sure that it lies between {percent(low)} and {percent(high)}."
    )


def nothing_known(document: Document, name: str) -> str:
    if not document["positions"]:
        return f"No {name} runs in the field, so there is nothing to replace."
    if not document["failures_seen"]:
        return f"No {document['part']} has failed yet. We cannot tell at which age replacing pays."
    return f"No use of the {plural(name)} in service is known. We cannot tell at which age replacing pays."


def signed_percent(share: float) -> str:
    return f"{number(-100 * share, 0)} % more" if share < 0 else f"{number(100 * share, 0)} % less"


def flat(document: Document) -> str:
    """How little it matters: the ages that cost about the same, and how sure the best one is."""
    told, clock = document["told"], document["clock"]
    if told is None or told["age"] is None:
        return ""
    low, high = told["flat"]
    within = percent(told["flat_within"])
    words = (
        f"Any age from {age(low, clock)} on, even never, costs within {within} of the best. "
        if high is None
        else f"Anything between {number(rounded(low, 2), 0)} and {age(high, clock)} costs within {within} of the best. "
    )
    first, last = told["age_band"]
    if first is None:
        return words
    if last is None:
        return f"{words}The best age itself may lie anywhere from {age(first, clock)} on: it could also be never."
    return (
        f"{words}The best age itself lies between {number(rounded(first, 2), 0)} and {age(last, clock)} "
        f"({percent(told['level'])} sure)."
    )


def beyond(document: Document) -> str:
    """A warning where the best age is one that no part has reached: the curve there is an extrapolation."""
    told, clock = document["told"], document["clock"]
    if told is None or told["age"] is None or told["age"] <= document["oldest"]:
        return ""
    return (
        f"The oldest part in service is {age(document['oldest'], clock)} old. What is said of greater ages is "
        "extrapolated from the fitted life; nobody has seen it."
    )


def age_in_forecast(document: Document) -> float:
    """The age at which a part is really changed: at visits, half an interval later on the mean."""
    told = document["told"]
    every = document["visit_every_days"]
    return float(told["age"] + (0.0 if every is None else every * told["pace"] / 2.0))


def at_visits(document: Document) -> str:
    every = document["visit_every_days"]
    if every is None:
        return "Planned replacement at any moment; failures are put right as they come."
    days = "every day" if every == 1 else f"every {number(every)} days"
    return f"Planned replacement only at a visit {days}, at the first one at which a part is that old."


def would_mean(planned: Document, base: Document, at: str) -> str:
    """Planned parts and failures of the next quarter, from the forecast; `at` is the age that was counted with."""
    changed, failures, before = planned["planned"], planned["total"], base["total"]
    return (
        f"Next quarter it would mean about {about(changed['mean'])} planned replacements "
        f"({between(changed['bands']['0.8'])} in 80 of 100 quarters) and {about(failures['mean'])} failures "
        f"({between(failures['bands']['0.8'])}) instead of {about(before['mean'])} ({between(before['bands']['0.8'])})"
        f"{at}."
    )


def curve(document: Document, currency: str) -> str:
    told = document["told"]
    costs = told["curve"]["cost"]
    return (
        f"Cost a quarter by the age of planned replacement, {currency}: least {number(rounded(min(costs), 3), 0)}, "
        f"waiting for failures {number(rounded(told['never'], 3), 0)}."
    )
