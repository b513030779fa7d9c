"""A wrong entry is struck out with a reason, never deleted."""

from __future__ import annotations

from typing import Any

from fleet.actions.base import change
from fleet.actions.changed_since import check_version, describe
from fleet.actions.checks_counters import check_without
from fleet.actions.checks_jobs import check_jobs_of
from fleet.actions.checks_places import Places
from fleet.actions.checks_rights import check_may_correct, module_of
from fleet.actions.correct_record import clean_reason, fetched
from fleet.actions.errors import AlreadyDone, BadValue, NotAllowed
from fleet.actions.ledger import check_store, effects, locked_balances, take_back
from fleet.actions.measured import MeasuredEnds
from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.actions.strike import strike
from fleet.actions.strike_visit import strike_visit
from fleet.formats import counted
from fleet.models import (
    BenchHours,
    BenchJob,
    Finding,
    Fitting,
    Person,
    Placement,
    Reading,
    StockMove,
    Stop,
    SupplyLine,
    Visit,
)
from fleet.rights import CORRECT, LOG, may

STRIKEABLE = (Visit, Finding, Fitting, Stop, Reading, Placement, BenchJob, BenchHours)


def strike_out(
    *, by: Person | None, record: Any, reason: str, version: int | None = None, with_all: bool = False
) -> Any:
    """A visit only when nothing standing hangs on it, or `with_all` that hangs on it."""
    if isinstance(record, StockMove):
        return strike_move(by=by, move=record, reason=reason, version=version)
    if not isinstance(record, STRIKEABLE):
        raise BadValue(f"{describe(record).capitalize()} is not struck out. End or close it instead.", field="record")
    reason = clean_reason(reason)
    with change(by=by, right=LOG, module=module_of(record), reason=reason) as module:
        record = fetched(record, module)
        if record.struck_out:
            raise AlreadyDone(f"This was struck out already: {record.struck_out}.", field="record")
        check_may_correct(by, record)
        if not isinstance(record, Reading):
            check_version(record, version)
        if isinstance(record, Visit):
            strike_visit(record, by, reason, with_all=with_all)
        elif isinstance(record, Fitting):
            check_not_a_cause(record)
            strike(record, by, reason)
        elif isinstance(record, Reading):
            strike_reading(record, by, reason)
        else:
            check_office(record, by)
            check_job_is_empty(record)
            strike(record, by, reason)
            if isinstance(record, Placement):
                check_jobs_of(module)
        rebuild_clocks([module.pk])
    return record


def check_not_a_cause(fitting: Fitting) -> None:
    others = [other.code for other in fitting.took_along.filter(struck_out="")]
    if others:
        raise BadValue(
            f"{len(others)} standing parts name {fitting.code} as what broke them ({', '.join(others[:3])}). "
            "Correct their cause first.",
            field="record",
        )


def check_office(record: Any, by: Person | None) -> None:
    if isinstance(record, Placement) and by is not None and not may(by, CORRECT):
        raise NotAllowed("Only a planner or manager strikes out where a module stood. Mark it as looking wrong.")


def check_job_is_empty(record: Any) -> None:
    """Hours, parts and changes of parts that hang on a job are told apart and struck out first."""
    if not isinstance(record, BenchJob):
        return
    numbers = (
        (BenchHours.objects.standing().filter(job=record).count(), "booking of hours", "bookings of hours"),
        (StockMove.objects.standing().filter(job=record).count(), "issue of parts", "issues of parts"),
        (Fitting.objects.standing().filter(job=record).count(), "change of a part", "changes of parts"),
    )
    words = ", ".join(counted(count, one, many) for count, one, many in numbers if count)
    if words:
        raise BadValue(f"Job {record.code} holds {words}. Strike those out first.", field="record")


def strike_move(*, by: Person | None, move: StockMove, reason: str, version: int | None = None) -> StockMove:
    """The store, and the other one of a transfer, get back what they had."""
    reason = clean_reason(reason)
    with change(by=by, right=LOG, reason=reason, raises_version=False):
        if move.line_id is not None:
            SupplyLine.objects.select_for_update(of=("self",), no_key=True).get(pk=move.line_id)
        locked_balances(effects(move))
        move = StockMove.objects.get(pk=move.pk)
        if move.struck_out:
            raise AlreadyDone(f"This was struck out already: {move.struck_out}.", field="record")
        check_may_correct(by, move)
        for store in (move.store, move.other_store):
            if store is not None:
                check_store(store, by, field="record")
        check_version(move, version)
        return take_back(move, by, reason)


def strike_reading(reading: Reading, by: Person | None, reason: str) -> None:
    place = Places(reading.module).at(reading.read_at)
    if reading.strokes is None and reading.hours is None:
        strike(reading, by, reason)
        return
    check_without(reading, place.zone)
    ends = MeasuredEnds(reading)
    strike(reading, by, reason)
    ends.follow()
