"""The order list's figures as rows on screen and in a file."""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterator
from decimal import Decimal
from typing import Any

from fleet.formats import number, percent, short_day

Document = dict[str, Any]

COLUMNS: list[Document] = [
    {"key": "part", "label": "Part, and why", "sort": True},
    {"key": "on_hand", "label": "On hand", "numeric": True, "sort": True},
    {"key": "use", "label": "Expected use", "numeric": True, "sort": True},
    {"key": "level", "label": "Reorder at, up to", "numeric": True},
    {"key": "tell_on", "label": "5 % chance out by", "numeric": True, "sort": True},
    {"key": "chance", "label": "Out before the next delivery", "numeric": True, "sort": True},
    {"key": "quantity", "label": "Order", "numeric": True, "sort": True},
    {"key": "cost", "label": "Cost", "numeric": True, "sort": True},
]
FILE_HEAD = [
    "part", "name", "supplier", "on_hand", "due", "expected_use", "use_from_80", "use_to_80", "days_covered",
    "reorder_level", "order_up_to", "wanting", "pack", "minimum", "order", "unit_cost", "cost", "out_with_5_percent_on",
    "chance_before_next_delivery", "chance_if_nothing_ordered", "lasts_until", "lasts_from_80", "lasts_to_80",
    "ordered_today_comes_on", "superseded_by", "reason",
]  # fmt: skip
LATE = 0.05


def chosen_lines(document: Document, parts: dict[str, Any], asked: Document, sort: str) -> list[Document]:
    """What the filters let through, sorted; at first what is below its level, then by the day it runs out."""
    words = asked["q"].casefold().split()
    lines = [
        line
        for line in document["lines"]
        if all(word in f"{line['part']} {line['name']}".casefold() for word in words)
        and asked["supplier"].casefold().strip() in line["supplier"].casefold()
        and (not asked["component"] or belongs(parts.get(line["part"]), asked["component"]))
        and shown(line, asked["shows"])
    ]
    return in_order(lines, sort)


def belongs(part: Any, component: Any) -> bool:
    return part is not None and part.component_id == component.pk


def shown(line: Document, shows: str) -> bool:
    if shows == "order":
        return bool(line["quantity"] > 0)
    if shows == "out":
        return bool(line["known"] and line["chance_before_delivery"] > LATE)
    return bool(line["superseded_by"]) if shows == "old" else True


def in_order(lines: list[Document], sort: str) -> list[Document]:
    falling, key = sort.startswith("-"), sort.removeprefix("-")
    keys: dict[str, Any] = {
        "part": lambda line: line["part"],
        "on_hand": lambda line: line["on_hand"],
        "use": lambda line: line["use_mean"],
        "tell_on": lambda line: line["tell_on"] or "9999",
        "chance": lambda line: line["chance_before_delivery"],
        "quantity": lambda line: line["quantity"],
        "cost": lambda line: Decimal(line["cost"] or 0),
    }
    if key in keys:
        return sorted(lines, key=keys[key], reverse=falling)
    return sorted(lines, key=lambda line: not line["below"])  # the rest stays as the list has it


def row(line: Document, cells: Document, currency: str) -> Document:
    """One part for order/lines.html."""
    due = f"{number(line['due'])} due" if line["due"] else "none due"
    if line["due"] and line["next_delivery"]["middle"]:
        due += f", about {a_day(line['next_delivery']['middle'])}"
    low, high = line["use_bands"].get("0.8", (0, 0))
    known = line["known"]
    packs = f"packs of {line['pack']}" if line["pack"] > 1 else ""
    return {
        **cells,
        "part": line["part"],
        "name": line["name"],
        "supplier": line["supplier"],
        "below": line["below"],
        "reason": line["reasons"][0],
        "more": line["reasons"][1:],
        "superseded_by": line["superseded_by"],
        "on_hand": number(line["on_hand"]),
        "late": line["on_hand"] < 0,
        "due": due,
        "use": use(line),
        "use_band": f"{number(low)} to {number(high)} in {number(line['span_days'], 0)} days" if high else "",
        "level": number(line["reorder_level"]) if known else "–",
        "up_to": f"up to {number(line['order_up_to'])}" if known else "",
        "tell_on": tell(line),
        "soon": bool(line["tell_on"]) and line["chance_if_nothing"] > LATE,
        "chance": chance(line["chance_before_delivery"]) if known else "–",
        "likely": known and line["chance_before_delivery"] > LATE,
        "quantity": number(line["quantity"]) if line["quantity"] else "–",
        "packs": packs,
        "cost": f"{number(Decimal(line['cost']), 0)}" if line["cost"] and line["quantity"] else "–",
        "unit": f"{number(Decimal(line['unit_cost']), 2)} {currency} each" if line["unit_cost"] else "no price",
    }


def use(line: Document) -> str:
    if not line["known"]:
        return "cannot tell"
    if line["none_failed"]:
        return "none failed yet"
    mean = line["use_mean"]
    return number(mean, 0 if mean >= 20 else 1) if mean else "none"


def tell(line: Document) -> str:
    if not line["known"]:
        return "–"
    return a_day(line["tell_on"]) if line["tell_on"] else f"after {a_day(line['looked_until'])}"


def chance(value: float) -> str:
    return percent(min(max(value, 1e-9), 1 - 1e-9))


def a_day(text: str) -> str:
    day = dt.date.fromisoformat(text)
    return short_day(day, day.year)


def file_line(line: Document) -> list[Any]:
    low, high = line["use_bands"].get("0.8", ("", ""))
    known = line["known"]
    lasts = line["lasts"]
    figures: list[Any] = [round(line["use_mean"], 2), low, high, round(line["span_days"])] if known else [""] * 4
    levels: list[Any] = [line["reorder_level"], line["order_up_to"]] if known else ["", ""]
    chances: list[Any] = (
        [round(line["chance_before_delivery"], 4), round(line["chance_if_nothing"], 4)] if known else ["", ""]
    )
    return [
        line["part"], line["name"], line["supplier"], line["on_hand"], line["due"], *figures, *levels, line["wanting"],
        line["pack"], line["keep_at_least"], line["quantity"], line["unit_cost"] or "", line["cost"] or "",
        line["tell_on"] or "", *chances, lasts["middle"] or "", lasts["first"] or "", lasts["last"] or "",
        line["comes"]["middle"] or "", line["superseded_by"], " ".join(line["reasons"]),
    ]  # fmt: skip


def notes(document: Document) -> list[str]:
    """What the list assumes."""
    return [*switch_notes(document), *unknown_notes(document)]


def switch_notes(document: Document) -> Iterator[str]:
    for each in document["switches"]:
        why = "By the rollout plan" if each["planned"] else "As assumed"
        until = f"; from {a_day(each['until'])} on no position takes {each['old']}" if each["until"] else ""
        pieces = f", {number(each['pieces'])} pieces into working modules" if each["pieces"] else ""
        yield f"{why} {each['new']} goes in for {each['old']}{until}{pieces}. Its use is counted so."


def unknown_notes(document: Document) -> Iterator[str]:
    if document["unknown"]:
        yield f"No life is on record for {', '.join(document['unknown'])}: the use of their parts cannot be told."
