"""Whether a redesign pays, as the page shows it: sentences, a table of quarters, and what the count rests on."""

from __future__ import annotations

import datetime as dt
from collections.abc import Sequence
from typing import Any

from fleet.formats import counted, long_day, number, rounded
from reliability.redesign_words import in_hundred, listed, times_of

LOWER = "at the lower bound"


def money_page(
    found: dict[str, Any],
    sides: Sequence[Any],
    costs: Any,
    currency: str,
    *,
    only_modes: bool = False,
) -> dict[str, Any]:
    """`told` None: nothing runs, or the old part has no life on record."""
    told = found["told"]
    page: dict[str, Any] = {"told": told, "currency": currency, "costs": cost_rows(sides, costs, currency)}
    if told is None:
        return page
    estimated, cautious = told["as estimated"], told.get(LOWER)
    bases = {side.component.code: found["bases"].get(side.component.code) for side in sides}
    page["assumed"] = all(basis is None or basis["name"] == "hope" for basis in bases.values())
    page["sentence"] = money_sentence(estimated, currency)
    page["rests"] = [rests_sentence(side, bases[side.component.code]) for side in sides if bases[side.component.code]]
    if only_modes:
        page["rests"].append("Failures of every mode count here, whichever are looked at above.")
    page["rests"] += [
        f"{each} is left out: nothing runs that could get the new part, or no life of the old one is on record."
        for each in found["not_counted"]
    ]
    if cautious:
        page["cautious"] = cautious_sentence(cautious, bases, currency)
    page["quarters"] = quarter_table(estimated, cautious, currency)
    page["components"] = component_table(found["by_component"], sides, currency)
    page["avoided"] = avoided(estimated)
    page["free"] = not (costs.failure or any(side.old_cost or side.new_cost for side in sides))
    return page


def money_sentence(told: dict[str, Any], currency: str) -> str:
    first = told["quarters"][0]
    failures, money, paid = first["failures_avoided"], first["money_saved"], told["break_even"]
    start = f"In the next 13 weeks {more_or_less(failures)}, and {money_words(money, currency)}."
    if not told["rollout_cost"]:
        return f"{start} Nothing is left in the plan: the new part goes in as the old ones come out."
    cost = f"{number(rounded(told['rollout_cost'], 3))} {currency}"
    within = f"within {13 * paid['quarters']} weeks"
    if paid["estimate"] is None:
        chance = in_hundred(paid["chance"])
        return f"{start} The chance that the {cost} for what is left of the rollout come back {within} is {chance}."
    day = {end: long_day(dt.date.fromisoformat(paid[end])) for end in ("lower", "estimate", "upper") if paid[end]}
    back = f"{start} The {cost} for what is left of the rollout are back by about {day['estimate']}"
    if "upper" in day:
        return f"{back} ({day['lower']} to {day['upper']} in 80 of 100 cases)."
    return (
        f"{back} (not before {day['lower']}); the chance that they are back {within} is {in_hundred(paid['chance'])}."
    )


def rests_sentence(side: Any, basis: dict[str, Any]) -> str:
    """Which ratios the count takes, over which old part, and why not the comparison that comes first."""
    over = f"{side.new} over {listed(basis['against'])}"
    why = f"{WHY_NOT[basis['why_not']]} " if basis["why_not"] else ""
    if basis["name"] == "hope":
        return f"{why}Counted with the hope, {over} {times_of(side.hope)} times: an assumption, no evidence."
    low, middle, high = (times_of(basis["ratio"][end]) for end in ("lower", "estimate", "upper"))
    ratios = f"{over} {low} to {high} times in 80 of 100 cases, half of them above {middle}"
    if basis["name"] == "all history":
        rest = " Other water, seasons and habits are in them, which the verdict leaves out."
        return f"{why}Counted with the ratios of the whole history, as the forecast does: {ratios}.{rest}"
    rest = ""
    if basis["against"] == [side.old] and len(side.replaced) > 1:
        rest = f" {side.old} is what would go in otherwise."
    elif len(basis["against"]) > 1:
        rest = f" Against {side.old} alone, which would go in otherwise, no ratio can be told yet."
    if basis["leans"]:
        rest += " After so few failures its wear is taken to grow with age as that of the old part."
    return f"{why}Counted with the ratios of the same dates and sites, as the verdict: {ratios}.{rest}"


WHY_NOT = {
    "same dates": "Over the same dates no ratio can be told yet.",
    "all history": "All history tells no ratio yet.",
    "hope": "",
}


def cautious_sentence(told: dict[str, Any], bases: dict[str, Any], currency: str) -> str:
    """What it would save if it were only as good as the lower end of what the records allow."""
    lows = [times_of(basis["lower"]) for basis in bases.values() if basis and basis["lower"]]
    if len(bases) == 1:
        only = f"only {lows[0]} times as long, the lower end of what the records allow"
        return f"If it really lived {only}: {lowered(money_sentence(told, currency))}"
    each = f"each only as long as the lower end of what the records allow ({listed(lows)} times)"
    return f"If the new parts lived {each}: {lowered(money_sentence(told, currency))}"


def more_or_less(band: dict[str, Any]) -> str:
    """Failures avoided, or those it brings on top."""
    count = abs(round(band["mean"]))
    if count == 0:
        return f"it changes the number of failures by less than one ({in_band(band, 1)} avoided in 80 of 100 cases)"
    if band["mean"] < 0:
        return f"it brings about {counted(count, 'more failure')} ({in_band(turned(band), 1)} in 80 of 100 cases)"
    return f"it avoids about {counted(count, 'failure')} ({in_band(band, 1)} in 80 of 100 cases)"


def money_words(band: dict[str, Any], currency: str) -> str:
    amount = number(rounded(round(abs(band["mean"])), 2))
    if band["mean"] < 0:
        return f"costs about {amount} {currency} ({in_band(turned(band), 2)})"
    return f"saves about {amount} {currency} ({in_band(band, 2)})"


def turned(band: dict[str, Any]) -> dict[str, Any]:
    """What is avoided as what comes on top."""
    return {"mean": -band["mean"], "lower": -band["upper"], "upper": -band["lower"]}


def in_band(band: dict[str, Any], figures: int) -> str:
    """Whole failures; money to two figures."""
    low, high = (round(band[end]) for end in ("lower", "upper"))
    if figures > 1:
        low, high = rounded(low, figures), rounded(high, figures)
    return f"{number(low)} to {number(high)}"


def lowered(sentence: str) -> str:
    return sentence[:1].lower() + sentence[1:]


def avoided(told: dict[str, Any]) -> str:
    """Crew visits and bench hours of the first quarter."""
    fewer, more = [], []
    for name, noun in (("visits_avoided", "crew visit"), ("bench_hours_avoided", "bench hour")):
        band = told[name]
        if not any(round(band[end]) for end in ("mean", "lower", "upper")):
            continue
        side, band = (fewer, band) if round(band["mean"]) >= 0 else (more, turned(band))
        side.append(f"{counted(round(band['mean']), noun)} ({in_band(band, 1)})")
    said = [f"Avoided with them in the next 13 weeks: {' and '.join(fewer)}."] if fewer else []
    said += [f"With them come {' and '.join(more)} more in the next 13 weeks."] if more else []
    return " ".join(said)


def quarter_table(estimated: dict[str, Any], cautious: dict[str, Any] | None, currency: str) -> dict[str, Any]:
    columns = [
        {"key": "quarter", "label": "Weeks from now"},
        {"key": "failures", "label": "Failures avoided", "numeric": True},
        {"key": "money", "label": f"Saved, {currency}", "numeric": True},
    ]
    if cautious:
        columns.append({"key": "cautious", "label": f"Saved at the lower bound, {currency}", "numeric": True})
    rows = []
    for place, each in enumerate(estimated["quarters"]):
        row = [
            f"{place * 13 + 1} to {place * 13 + 13}",
            cell(each["failures_avoided"], 3),
            cell(each["money_saved"], 2),
        ]
        if cautious:
            row.append(cell(cautious["quarters"][place]["money_saved"], 2))
        rows.append(row)
    return {"columns": columns, "rows": rows}


def component_table(found: dict[str, Any], sides: Sequence[Any], currency: str) -> dict[str, Any] | None:
    """Of several components what each one adds in the first quarter."""
    if not found:
        return None
    columns = [
        {"key": "component", "label": "Component"},
        {"key": "failures", "label": "Failures avoided, weeks 1 to 13", "numeric": True},
        {"key": "money", "label": f"Saved, {currency}", "numeric": True},
    ]
    rows = [
        [
            {"text": side.component.title, "sub": f"{side.new} in place of {side.old}"},
            cell(found[side.component.code]["failures_avoided"], 3),
            cell(found[side.component.code]["money_saved"], 2),
        ]
        for side in sides
        if side.component.code in found
    ]
    return {"columns": columns, "rows": rows}


def cell(band: dict[str, Any], figures: int) -> dict[str, Any]:
    ends = [number(rounded(round(band[end]), figures)) for end in ("lower", "upper")]
    return {"text": number(rounded(round(band["mean"]), figures)), "sub": f"{ends[0]} to {ends[1]}"}


def cost_rows(sides: Sequence[Any], costs: Any, currency: str) -> list[dict[str, str]]:
    """What the count was made with, and where it is entered."""
    rows: list[tuple[str, float, str]] = []
    for side in sides:
        rows.append((f"Old part {side.old}", side.old_cost, "catalogue"))
        rows.append((f"New part {side.new}", side.new_cost, "catalogue"))
    rows += [
        ("A failure beyond the part", costs.failure, "book settings and redesign"),
        ("Rollout a module, beyond the part", costs.module, "redesign"),
    ]
    return [{"name": name, "value": f"{number(value, 2)} {currency}", "where": where} for name, value, where in rows]
