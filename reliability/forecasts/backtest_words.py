"""What a backtest says, in the sentences a manager reads."""

from __future__ import annotations

import datetime as dt
from typing import Any

from fleet.formats import counted, long_day, number
from reliability.forecasts.backtest_quarter import MEASURES, NO_LIFE
from reliability.forecasts.rivals import NAMES

LEAST_TOLD = 0.05  # a miss that is written as 0.0
ENOUGH_FOR_SHARES = 10  # expected events below which a difference in per cent says little
FEWEST = 4  # quarters below which the bands are not judged
MAIN_BAND = "0.8"


def line(document: dict[str, Any], measure: str = "failures") -> dict[str, str]:
    """`sentence`: how many actual figures lay within the 80 % band and what is ordinary; `note`: what follows."""
    if document["judged"] == 0:
        return {"sentence": too_young(document), "note": ""}
    found = document["measures"][measure]["hits"][MAIN_BAND]
    said = f"In the last {quarters(found['of'])} {figures(found['hits'])} lay within the 80\u00a0% band"
    if found["of"] == 1:
        said = (
            f"In the last quarter the actual figure lay {'within' if found['hits'] else 'outside'} the 80\u00a0% band"
        )
    if found["of"] < FEWEST:
        return {"sentence": f"{said}.", "note": "That is too few quarters to say whether the bands hold."}
    return {"sentence": f"{said}; {span(found['ordinary'])} is ordinary.", "note": judgement(found)}


def judgement(found: dict[str, Any]) -> str:
    """What hits outside the ordinary mean; empty within."""
    low, high = found["ordinary"]
    if found["hits"] < low:
        return "So few come to a right forecast in less than one case of ten: take this one as less sure than it says."
    return "The bands were wider than they had to be." if found["hits"] > high else ""


def too_young(document: dict[str, Any]) -> str:
    """The empty state: why nothing can be judged yet, and from when on."""
    first = dt.date.fromisoformat(document["first_after"])
    if first > dt.date.fromisoformat(document["as_of"]):
        return (
            "The records are too young: no quarter that began after the first of them is over yet. The first can be "
            f"judged on {long_day(first)}."
        )
    if any(each["passed_over"] == NO_LIFE for each in document["passed_over"]):
        return "No past quarter can be judged: when they began, no life was on record to learn from."
    return "No past quarter can be judged: when they began, no part of this kind was known to run in the field."


def quarters(count: int) -> str:
    return "quarter" if count == 1 else f"{number(count)} quarters"


def figures(count: int) -> str:
    """`7 actual figures`, `1 actual figure`, `none of the actual figures`."""
    if count == 0:
        return "none of the actual figures"
    return f"{number(count)} actual {'figure' if count == 1 else 'figures'}"


def span(ends: list[int]) -> str:
    low, high = ends
    return number(low) if low == high else f"{number(low)} to {number(high)}"


def other_bands(document: dict[str, Any], measure: str = "failures") -> str:
    """The 50 and 95 % bands, and the PIT, for which bands of whole numbers hold no more than they promise."""
    hits, pit = document["measures"][measure]["hits"], document["measures"][measure]["pit80"]
    others = {band: found for band, found in hits.items() if band != MAIN_BAND}
    told = [
        f"the {100 * float(band):.0f}\u00a0% band held {number(found['hits'])} ({span(found['ordinary'])} is ordinary)"
        for band, found in others.items()
    ]
    middle = f"{number(pit['hits'])} lay in the middle 80\u00a0% ({span(pit['ordinary'])} is ordinary)"
    return (
        f"Of the same {quarters(pit['of'])}, {' and '.join(told)}. With the edges of the bands shared out by lot "
        f"(randomised PIT), {middle}."
    )


def bias(document: dict[str, Any], measure: str = "failures") -> str:
    """Too many or too few over all quarters, with the band of the sum."""
    found, told = document["measures"][measure]["bias"], MEASURES[measure]
    low, high = found["bands"]["0.95"]
    actual = found["actual"]
    # where no failure had been seen, a mean would rest on the prior alone
    expected = float(found["median"]) if found["none_known"] else found["expected"]
    hoped = number(expected, 0 if expected >= 20 or found["none_known"] else 1)
    said = f"{number(actual)} {told.units} {told.came} where {hoped} were expected in all"
    if expected >= ENOUGH_FOR_SHARES and round(100 * abs(actual / expected - 1)):
        said += f", {100 * abs(actual / expected - 1):.0f}\u00a0% {'more' if actual > expected else 'fewer'}"
    verdict = f"{span([low, high])} would be ordinary if each quarter missed by itself"
    if actual > high:
        return f"{said}; {verdict}. The forecasts ran too low."
    return f"{said}; {verdict}. The forecasts ran too high." if actual < low else f"{said}; {verdict}."


def rivals(document: dict[str, Any], measure: str = "failures") -> list[str]:
    """One sentence a plain rival: who missed by less, by how much, how sure."""
    found = document["measures"][measure]
    return [rival_sentence(key, each, MEASURES[measure].units) for key, each in found["rivals"].items()]


def rival_sentence(key: str, found: dict[str, Any] | None, units: str) -> str:
    """Both misses, who was nearer how often, and whether that can be told from chance."""
    name = NAMES[key].capitalize()
    if found is None:
        return f"{name}: it cannot be had for any of these quarters."
    said = (
        f"{name}: missed by {miss(found['crps'])} {units} a quarter on average, the forecast by "
        f"{miss(found['forecast'])}; the forecast was nearer in {number(found['forecast_nearer'])} of "
        f"{quarters(found['of'])}."
    )
    more = found["more"]
    if more is None:
        return f"{said} One quarter cannot tell which is better."
    lower, upper = miss(abs(more["lower"])), miss(abs(more["upper"]))
    if max(abs(more["lower"]), abs(more["upper"])) < LEAST_TOLD:
        return f"{said} That is no difference worth a choice."
    if more["lower"] > 0:
        return f"{said} The forecast was better (95\u00a0% sure: by {lower} to {upper})."
    if more["upper"] < 0:
        return f"{said} The forecast was worse (95\u00a0% sure: by {upper} to {lower})."
    return (
        f"{said} Which is better cannot be told from so few quarters (95\u00a0% sure: between {lower} in the rival’s "
        f"favour and {upper} in the forecast’s)."
    )


def miss(value: float) -> str:
    return number(value, 0 if value >= 20 else 1)


def came_later(document: dict[str, Any], measure: str = "failures") -> str:
    """Failures no forecast could count on; empty if there were none, or another measure is told."""
    if measure != "failures":
        return ""
    rows = document["measures"][measure]["quarters"]
    count = sum(row["in_modules_that_came_later"] for row in rows)
    if not count:
        return ""
    return (
        f"{counted(count, 'failure')} of these happened in modules that were not in the field when the forecast was "
        "made. They count as misses all the same: the parts were needed."
    )


def missing(document: dict[str, Any]) -> str:
    """How many of the quarters asked for could not be judged, and why; empty if all were."""
    reasons: dict[str, list[str]] = {}
    for each in document["passed_over"]:
        reasons.setdefault(each["passed_over"], []).append(each["from"])
    told = [f"{counted(len(days), 'earlier quarter')} could not be judged: {why} then" for why, days in reasons.items()]
    return f"{'; '.join(told)}." if told else ""
