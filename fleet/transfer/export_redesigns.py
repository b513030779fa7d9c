"""The rows of redesigns.csv, replacements.csv and rollout.csv."""

from __future__ import annotations

from fleet.models import RedesignChange
from fleet.transfer.plain_rows import Rows, plain
from fleet.transfer.scope import Scope


def redesigns(scope: Scope) -> Rows:
    for *row, cost, visits, hours, days, note in plain(
        scope.redesign_rows().order_by("code_order"), "code", "name", "hope", "starts_on", "cost_a_module",
        "visits_a_failure", "bench_hours_a_failure", "stop_days_a_failure", "note",
    ):  # fmt: skip
        yield *row, cost if scope.costs else None, visits, hours, days, note


def replacements(scope: Scope) -> Rows:
    rows = RedesignChange.objects.filter(redesign__in=scope.redesign_rows())
    replaced: dict[int, list[str]] = {}
    for line, code in RedesignChange.replaces.through.objects.filter(redesignchange__in=rows).values_list(
        "redesignchange_id", "part__code"
    ):
        replaced.setdefault(line, []).append(code)
    ordered = rows.order_by("redesign__code_order", "new_part__component__code_order", "pk")
    for pk, redesign, part in plain(ordered, "pk", "redesign__code", "new_part__code"):
        yield redesign, part, " ".join(sorted(replaced.get(pk, ())))


def rollout(scope: Scope) -> Rows:
    query = scope.steps().order_by("redesign__code_order", "order", "pk")
    yield from plain(query, "redesign__code", "module__code", "order", "planned_on")
