"""What on the records needs a decision today; the estimates beside it come from reliability/."""

from __future__ import annotations

import datetime as dt
from collections import Counter
from typing import Any

from django.db.models import Exists, OuterRef
from django.db.models.functions import Coalesce
from django.utils import timezone

from fleet.formats import counted
from fleet.models import FAILURE_REASONS, Fitting, LooksWrong, Module, ModuleState, Position, Site, SiteKind, Stop
from fleet.position_names import position_names
from fleet.rights import CATALOGUE, CORRECT, LOG, may
from fleet.today_stock import stock_today

MOST = 12  # lines shown before “all of them”
MOST_EMPTY = 200  # empty positions looked at, to tell each where its module’s stop is told
VISITS_WITHIN_DAYS = 7
WEEKS_BEFORE = 8


def stopped_now(request: Any) -> dict[str, Any]:
    """Modules standing still, the longest first."""
    stops = (
        request.seen(Stop)
        .now()
        .filter(module__in=request.seen(Module).with_state().in_state(ModuleState.STOPPED).values("pk"))
        .select_related("module", "site", "reported_by", "visit")
        .order_by("stopped_at")
    )
    rows = list(stops[: MOST + 1])
    return {"stops": rows[:MOST], "more_stops": len(rows) > MOST, "stop_count": stops.count()}


def empty_positions(request: Any) -> list[Any]:
    """Positions of modules in service that hold no part, though one stood there before."""
    standing = request.seen(Fitting).running().filter(module=OuterRef("pk"), position=OuterRef("type__positions"))
    before = request.seen(Fitting).standing().filter(module=OuterRef("pk"), position=OuterRef("type__positions"))
    rows = list(
        request.seen(Module)
        .filter(scrapped_on=None)
        .filter(~Exists(standing), Exists(before))
        .values_list("code", "type", "type__positions")
        .order_by("code_order")[:MOST_EMPTY]
    )
    types = {kind for _, kind, _ in rows}
    positions = list(request.seen(Position).filter(type__in=types).select_related("component"))
    names: dict[int, str] = {}
    for kind in types:
        names |= position_names(position for position in positions if position.type_id == kind)
    return [{"module": module, "position": names[position]} for module, _, position in rows]


def told_at_stops(stops: list[Any], empty: list[Any]) -> list[Any]:
    """What a stopped module lacks is told where its stop is told; what stays is of modules not listed there."""
    listed = {stop.module.code: stop for stop in stops}
    for stop in stops:
        stop.lacks = [each["position"] for each in empty if each["module"] == stop.module.code]
    return [each for each in empty if each["module"] not in listed][:MOST]


def failures_by_week(request: Any, today: dt.date) -> dict[str, Any]:
    """Failures since Monday beside the weeks before: what was recorded, no estimate."""
    monday = today - dt.timedelta(days=today.weekday())
    first = monday - dt.timedelta(weeks=WEEKS_BEFORE)
    days = (
        request.seen(Fitting)
        .standing()
        .filter(reason__in=FAILURE_REASONS)
        .annotate(day=Coalesce("failed_on", "removed_on"))
        .filter(day__gte=first, day__lte=today)
        .values_list("day", flat=True)
    )
    weeks = Counter((day - first).days // 7 for day in days)
    before = [weeks[number] for number in range(WEEKS_BEFORE)]
    if not any(before) and not weeks[WEEKS_BEFORE]:
        return {}
    now = counted(weeks[WEEKS_BEFORE], "failure")
    low, high = min(before), max(before)
    usual = f"{low}" if low == high else f"{low} to {high}"
    return {"sentence": f"{now} since Monday; {usual} in each of the {WEEKS_BEFORE} weeks before."}


def visits_due(request: Any, today: dt.date) -> list[Site]:
    """Sites whose planned visit is due within a week, or overdue."""
    until = today + dt.timedelta(days=VISITS_WITHIN_DAYS)
    return list(
        request.seen(Site)
        .filter(next_visit_on__lte=until)
        .exclude(kind=SiteKind.DEPOT)
        .order_by("next_visit_on", "code_order")[:MOST]
    )


def sites_without_answer(request: Any) -> list[Site]:
    """Sites where nobody said whether failures are reported at once: life estimates need it."""
    if not may(request.user, CATALOGUE):
        return []
    rows = request.seen(Site).filter(reports_at_once=None).exclude(kind=SiteKind.DEPOT)
    return list(rows.order_by("code_order")[:MOST])


def waiting_marks(request: Any) -> list[LooksWrong]:
    rows = request.seen(LooksWrong).waiting().select_related("module", "said_by").order_by("said_at")
    return list(rows[:MOST])


def sentence(request: Any, stop_count: int, marks: int) -> str:
    modules = request.seen(Module).filter(scrapped_on=None).count()
    if modules == 0:
        return "No module of yours is on record yet."
    still = "none stands still" if stop_count == 0 else f"{stop_count} {'stands' if stop_count == 1 else 'stand'} still"
    waits = ""
    if marks:
        marked = counted(marks, "record is marked as wrong and waits", "records are marked as wrong and wait")
        waits = f" {marked} for a decision."
    return f"Of {counted(modules, 'module')}, {still}.{waits}"


def records_today(request: Any) -> dict[str, Any]:
    """Everything the Today screen shows from the records alone."""
    today = timezone.localdate()
    marks = waiting_marks(request)
    stopped = stopped_now(request)
    return {
        "today": today,
        **stopped,
        "empty_positions": told_at_stops(stopped["stops"], empty_positions(request)),
        "visits_due": visits_due(request, today),
        "sites_without_answer": sites_without_answer(request),
        "marks": marks,
        "may_settle": may(request.user, CORRECT),
        "lead": sentence(request, stopped["stop_count"], len(marks)),
        "failures": failures_by_week(request, today),
        "may_log": may(request.user, LOG),
        **stock_today(request, today),
    }
