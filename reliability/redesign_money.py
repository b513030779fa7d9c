"""Whether a redesign pays, as the page shows it: sentences and a table of quarters."""

from __future__ import annotations

from typing import Any

from fleet.formats import number, rounded
from reliability import redesign_words as words


def money_page(found: dict[str, Any], costs: Any, currency: str, document: dict[str, Any]) -> dict[str, Any]:
    """`told` None: nothing runs, or the old part has no life on record."""
    told = found["told"]
    page: dict[str, Any] = {"told": told, "currency": currency, "costs": cost_rows(costs, currency)}
    if told is None:
        return page
    estimated = told["as estimated"]
    page["sentence"] = words.money_sentence(estimated, currency)
    page["taken"] = words.taken_sentence(estimated, document)
    if "at the lower bound" in told:
        only = number(found["lower_ratio"], 2)
        page["cautious"] = (
            f"If it really lived only {only} times as long, the lower end of what the records allow: "
            f"{lowered(words.money_sentence(told['at the lower bound'], currency))}"
        )
    page["quarters"] = quarter_table(estimated, told.get("at the lower bound"), currency)
    page["avoided"] = avoided(estimated)
    page["free"] = not (costs.failure or costs.old_part or costs.new_part)
    return page


def lowered(sentence: str) -> str:
    return sentence[:1].lower() + sentence[1:]


def avoided(told: dict[str, Any]) -> str:
    """Crew visits and bench hours of the first quarter."""
    visits, hours = told["visits_avoided"], told["bench_hours_avoided"]
    parts = [f"{number(round(visits['mean']))} crew visits ({words.in_band(visits, 1)})"] if visits["mean"] else []
    if hours["mean"]:
        parts.append(f"{number(round(hours['mean']))} bench hours ({words.in_band(hours, 1)})")
    return f"With them go {' and '.join(parts)} in the next 13 weeks." if parts else ""


def quarter_table(estimated: dict[str, Any], cautious: dict[str, Any] | None, currency: str) -> dict[str, Any]:
    columns = [
        {"key": "quarter", "label": "13 weeks from now"},
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


def cell(band: dict[str, Any], figures: int) -> dict[str, Any]:
    ends = [number(rounded(round(band[end]), figures)) for end in ("lower", "upper")]
    return {"text": number(rounded(round(band["mean"]), figures)), "sub": f"{ends[0]} to {ends[1]}"}


def cost_rows(costs: Any, currency: str) -> list[dict[str, str]]:
    """What the count was made with, and where it is entered."""
    return [
        {"name": "Old part", "value": f"{number(costs.old_part, 2)} {currency}", "where": "catalogue"},
        {"name": "New part", "value": f"{number(costs.new_part, 2)} {currency}", "where": "catalogue"},
        {
            "name": "A failure beyond the part",
            "value": f"{number(costs.failure, 2)} {currency}",
            "where": "book settings",
        },
        {"name": "Rollout a module", "value": f"{number(costs.module, 2)} {currency}", "where": "redesign"},
    ]
