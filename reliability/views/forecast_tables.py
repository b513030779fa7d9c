"""The figures of the Forecast screen as tables and files."""

from __future__ import annotations

from typing import Any

from django.http import HttpResponse

from fleet.models import Book, Part
from fleet.rights import COSTS, may
from fleet.views.listing import as_csv
from reliability import forecast_what_if_words as what_if_words
from reliability import forecast_words as words
from reliability.views.forecast_answer import Answer

BANDS = ("0.5", "0.8", "0.95")
Document = dict[str, Any]


def overview(answer: Answer) -> Document:
    """Every component in one line."""
    columns = [
        {"key": "component", "label": "Component"},
        {"key": "positions", "label": "In service", "numeric": True},
        {"key": "failures", "label": "Failures expected", "numeric": True},
        {"key": "band", "label": "80 in 100", "numeric": True},
        {"key": "used", "label": "Parts used, 80 in 100", "numeric": True},
        {"key": "plan", "label": "Plan for", "numeric": True},
    ]
    documents, rows = answer.documents, []
    query = answer.request.GET.copy()
    for each in sorted(answer.components, key=lambda one: -documents[one.code]["total"]["mean"]):
        document = documents[each.code]
        total, used = document["total"], document["total"]["parts_used"]
        query["component"] = each.code
        rows.append(
            [
                {"text": each.title, "url": f"?{query.urlencode()}"},
                document["positions"],
                expected_cell(document, total),
                words.between(total["bands"]["0.8"]),
                {**expected_cell(document, used), "sub": words.between(used["bands"]["0.8"])},
                {"text": words.plan_for(used), "strong": True},
            ]
        )
    return {"columns": columns, "rows": rows}


def expected_cell(document: Document, told: Document) -> Any:
    """The expected count, or the middle one where no failure was seen: there the mean says more than anybody knows."""
    if document["failures_seen"] == 0:
        return {"text": words.number(told["median"]), "sub": "none failed yet"}
    return {"text": words.about(told["mean"])}


def parts_needed(answer: Answer) -> list[tuple[Part, Document]]:
    """What will go in, by part, the most first; the chosen component with what is assumed of it."""
    parts = {part.code: part for part in answer.request.seen(Part).select_related("component")}
    documents = dict(answer.documents)
    if answer.chosen is not None:
        documents[answer.chosen.code] = answer.told
    found = [
        (parts[row["group"]], row["parts_used"])
        for document in documents.values()
        for row in document["groups"]["needed"]
        if row["group"] in parts
    ]
    return sorted(found, key=lambda pair: -pair[1]["mean"])


def needed_table(request: Any, answer: Answer) -> Document:
    costs = may(request.user, COSTS)
    columns: list[Document] = [
        {"key": "part", "label": "Part"},
        {"key": "expected", "label": "Expected", "numeric": True},
        {"key": "band", "label": "80 in 100", "numeric": True},
        {"key": "plan", "label": "Plan for", "numeric": True},
    ]
    if costs:
        cost = f"Cost of the plan, {Book.load().currency}"
        columns.append({"key": "cost", "label": cost, "numeric": True, "digits": 0})
    rows = []
    for part, used in parts_needed(answer):
        planned = words.plan_for(used)
        cells: list[Any] = [
            {"text": part.code, "sub": part.name},
            words.about(used["mean"]),
            words.between(used["bands"]["0.8"]),
            {"text": planned, "strong": True},
        ]
        if costs:
            cells.append(None if part.unit_cost is None else part.unit_cost * planned)
        rows.append(cells)
    return {"columns": columns, "rows": rows}


def parts_file(request: Any, answer: Answer) -> HttpResponse:
    """The plain list as CSV."""
    costs = may(request.user, COSTS)
    level = f"plan_for_{100 * answer.form.service_level():g}"
    head = ["part", "name", "component", "supplier", "expected", "from_80", "to_80", level]
    lines = []
    for part, used in parts_needed(answer):
        low, high = used["bands"]["0.8"]
        line = [part.code, part.name, part.component.code, part.supplier]
        line += [round(used["mean"], 2), low, high, words.plan_for(used)]
        lines.append(line + ([part.unit_cost] if costs else []))
    return as_csv("parts next quarter", head + (["unit_cost"] if costs else []), lines)  # type: ignore[return-value]


def weeks_file(answer: Answer) -> HttpResponse:
    """The drawn weeks as CSV; beside assumptions the base case."""
    document = answer.told
    base = answer.documents[document["component"]]["weeks"] if answer.changed is not None else None
    head = [
        "component",
        "week_from",
        "expected",
        *(f"{end}_{band_name(band)}" for band in BANDS for end in ("from", "to")),
    ]
    lines = []
    for place, week in enumerate(document["weeks"]):
        line = [document["component"], week["from"], round(week["mean"], 3)]
        line += [end for band in BANDS for end in week["bands"][band]]
        lines.append(line + ([round(base[place]["mean"], 3)] if base else []))
    name = f"{document['component'].lower()} by week"
    return as_csv(name, head + (["expected_base_case"] if base else []), lines)  # type: ignore[return-value]


def band_name(band: str) -> str:
    return f"{100 * float(band):.0f}"


def compared(answer: Answer) -> Document | None:
    """Base case, what-if and the difference, with its band, side by side."""
    if answer.changed is None or answer.difference is None or answer.chosen is None:
        return None
    base, changed, difference = answer.documents[answer.chosen.code], answer.changed, answer.difference
    columns = [
        {"key": "what", "label": "Count"},
        {"key": "base", "label": "Base case", "numeric": True},
        {"key": "changed", "label": "With this", "numeric": True},
        {"key": "difference", "label": "Difference", "numeric": True},
    ]
    pairs = [
        ("Failures", base["total"], changed["total"], difference["failures"]),
        ("Parts used", base["total"]["parts_used"], changed["total"]["parts_used"], difference["parts_used"]),
        ("Planned replacements", base["planned"], changed["planned"], difference["planned"]),
    ]
    rows: list[list[Any]] = [
        [
            name,
            told(before),
            told(after),
            signed_cell(changes),
        ]
        for name, before, after, changes in pairs
        if before["mean"] or after["mean"]
    ]
    used = (base["total"]["parts_used"], changed["total"]["parts_used"])
    before, after = words.plan_for(used[0]), words.plan_for(used[1])
    name = f"Parts to plan for, {words.service_of(used[0])}"
    rows.append([name, before, {"text": after, "strong": True}, signed(after - before)])
    return {"columns": columns, "rows": rows, "assumed": what_if_words.assumed(answer.what_if, changed["clock"])}


def told(found: Document) -> Document:
    return {"text": words.about(found["mean"]), "sub": words.between(found["bands"]["0.8"])}


def signed_cell(changes: Document) -> Document:
    return {"text": signed(changes["mean"]), "sub": signed_band(changes["bands"]["0.8"])}


def signed(value: float) -> str:
    """`+12`, `−61`, `0`"""
    text = words.about(value)
    return f"+{text}" if value > 0 and any(each in "123456789" for each in text) else text


def signed_band(band: list[int]) -> str:
    low, high = (f"+{end}" if end > 0 else words.number(end) for end in band)
    return low if band[0] == band[1] else f"{low} to {high}"


def followers(document: Document) -> dict[str, str]:
    """For each design, in words, what goes in after it where that is another."""
    after: dict[str, list[str]] = {}
    for part, needed in document["follows"]:
        after.setdefault(part, []).append(needed)
    return {part: f"followed by {' or '.join(needed)}" for part, needed in after.items() if needed != [part]}


def group_table(document: Document, grouping: str, label: str, followed_by: dict[str, str]) -> Document:
    columns = [
        {"key": "group", "label": label},
        {"key": "mean", "label": "Failures expected", "numeric": True},
        *({"key": band, "label": f"{band_name(band)} in 100", "numeric": True} for band in BANDS),
        {"key": "plan", "label": "Parts to plan for", "numeric": True},
    ]
    rows = [
        [
            {"text": row["group"], "sub": followed_by.get(row["group"], "")},
            words.about(row["mean"]),
            *(words.between(row["bands"][band]) for band in BANDS),
            {"text": words.plan_for(row["parts_used"]), "strong": True},
        ]
        for row in document["groups"][grouping]
    ]
    return {"columns": columns, "rows": rows}
