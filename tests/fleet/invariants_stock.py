"""What must hold of stores, supply orders and the bench, checked on raw rows: it shares no code with the actions."""

from __future__ import annotations

import datetime as dt
from collections import defaultdict
from collections.abc import Iterator
from itertools import pairwise

from fleet.models import BenchHours, BenchJob, Placement, StockBalance, StockMove, Store, SupplyLine, SupplyOrder
from tests.fleet.invariants import Row, day, grouped, rows_of, standing


def broken_stock_rules() -> list[str]:
    return [breach for rule in RULES for breach in rule()]


def sums() -> dict[tuple[int, int, str], int]:
    found: dict[tuple[int, int, str], int] = defaultdict(int)
    for row in standing(StockMove):
        found[row["store_id"], row["part_id"], row["condition"]] += row["quantity"]
        if row["other_store_id"] is not None:
            found[row["other_store_id"], row["part_id"], row["condition"]] -= row["quantity"]
    return found


def nothing_lies_below_zero() -> Iterator[str]:
    allowed = {row["id"] for row in rows_of(Store) if row["may_go_below_zero"]}
    for (store, part, condition), quantity in sums().items():
        if quantity < 0 and store not in allowed:
            yield f"{quantity} {condition} of part {part} at store {store}"


def balances_are_the_sums() -> Iterator[str]:
    kept = {(row["store_id"], row["part_id"], row["condition"]): row["on_hand"] for row in rows_of(StockBalance)}
    found = sums()
    for key in {*kept, *found}:
        if kept.get(key, 0) != found.get(key, 0):
            yield f"balance {key} says {kept.get(key, 0)}, the moves {found.get(key, 0)}"


def moves_have_their_sign() -> Iterator[str]:
    for row in standing(StockMove):
        kind, quantity = row["kind"], row["quantity"]
        wrong = (kind == "receipt" and quantity <= 0) or (kind in {"issue", "scrap"} and quantity >= 0)
        if wrong or (kind == "transfer") != (row["other_store_id"] is not None):
            yield f"move {row['id']} is a {kind} of {quantity}"


def no_line_gets_more_than_was_ordered() -> Iterator[str]:
    ordered = {row["id"]: day(row["ordered_on"]) for row in rows_of(SupplyOrder)}
    came: dict[int, list[Row]] = defaultdict(list)
    for row in standing(StockMove):
        if row["line_id"] is not None:
            came[row["line_id"]].append(row)
    lines = {row["id"]: row for row in rows_of(SupplyLine)}
    for line, receipts in came.items():
        if sum(row["quantity"] for row in receipts) > lines[line]["quantity"] or lines[line]["struck_out"]:
            yield f"line {line} got {receipts}"
        first = ordered[lines[line]["order_id"]] or dt.date.max
        if any((day(row["happened_on"]) or dt.date.min) < first for row in receipts):
            yield f"something came for line {line} before it was ordered"
        if any(row["part_id"] != lines[line]["part_id"] for row in receipts):
            yield f"another part came for line {line}"


def jobs_happen_at_their_depot() -> Iterator[str]:
    stays = standing(Placement)
    for job in standing(BenchJob):
        until = day(job["finished_on"]) or dt.date.max
        here = sorted(
            (day(s["from_on"]) or dt.date.min, day(s["to_on"]) or dt.date.max)
            for s in stays
            if s["module_id"] == job["module_id"] and s["site_id"] == job["depot_id"]
        )
        reached = day(job["received_on"]) or dt.date.max
        for start, end in here:
            if start <= reached:
                reached = max(reached, end)
        if not any(start <= (day(job["received_on"]) or dt.date.max) <= end for start, end in here) or reached < until:
            yield f"job {job['id']} is not covered by a stay at its depot"


def jobs_of_a_module_do_not_overlap() -> Iterator[str]:
    for (module,), jobs in grouped(standing(BenchJob), "module_id"):
        spans = sorted((day(j["received_on"]) or dt.date.max, day(j["finished_on"]) or dt.date.max) for j in jobs)
        for (_, end), (start, _later) in pairwise(spans):
            if start < end:
                yield f"two jobs of module {module} overlap"


def hours_fit_into_days() -> Iterator[str]:
    for (person, on_day), rows in grouped(standing(BenchHours), "person_id", "day"):
        if sum(row["hours"] for row in rows) > 24 + 1e-9:
            yield f"person {person} worked {sum(row['hours'] for row in rows)} h on {on_day}"


def newest_history_is_the_record() -> Iterator[str]:
    for model in (StockMove, SupplyOrder, SupplyLine, BenchJob, BenchHours, Store):
        newest = {row["id"]: row for row in rows_of(model.history.model)}  # type: ignore[attr-defined]
        for row in rows_of(model):
            kept = newest.get(row["id"], {})
            differing = [name for name in row if name in kept and kept[name] != row[name]]
            if not kept or differing:
                yield f"{model.__name__} {row['id']} changed without history: {differing}"


RULES = [
    nothing_lies_below_zero,
    balances_are_the_sums,
    moves_have_their_sign,
    no_line_gets_more_than_was_ordered,
    jobs_happen_at_their_depot,
    jobs_of_a_module_do_not_overlap,
    hours_fit_into_days,
    newest_history_is_the_record,
]
