"""A part leaves a store for a visit or a bench job."""

from __future__ import annotations

import datetime as dt
import uuid

from fleet.actions.base import change, lock_module, once, sees
from fleet.actions.checks_values import clean_text
from fleet.actions.errors import AlreadyDone, BadValue, NotAllowed
from fleet.actions.ledger import check_store, fresh_part, moved_on, not_before, pieces, post
from fleet.models import BenchJob, Condition, MoveKind, Part, Person, StockMove, Store, Visit
from fleet.rights import ISSUE, STOCK, may


def issue_part(
    *,
    by: Person | None,
    store: Store,
    part: Part,
    quantity: int = 1,
    happened_on: dt.date | None = None,
    visit: Visit | None = None,
    job: BenchJob | None = None,
    condition: str = Condition.NEW,
    reason: str = "",
    entry_key: uuid.UUID | None = None,
    code: str | None = None,
) -> StockMove:
    """Of two people who issue the last one, the second is told that none is left."""
    said = (store, part, quantity, happened_on, visit, job, condition, reason, code)
    with (
        change(by=by, right=ISSUE, raises_version=False),
        once(entry_key, by=by, verb="issue_part", said=said) as answer,
    ):
        if "move" in answer:
            return StockMove.objects.get(pk=answer["move"])
        move = write_issue(
            by=by, store=store, part=part, quantity=quantity, happened_on=happened_on, visit=visit, job=job,
            condition=condition, reason=reason, code=code,
        )  # fmt: skip
        answer["move"] = move.pk
    return move


def write_issue(
    *,
    by: Person | None,
    store: Store,
    part: Part,
    quantity: int,
    happened_on: dt.date | None,
    visit: Visit | None,
    job: BenchJob | None,
    condition: str = Condition.NEW,
    reason: str = "",
    code: str | None = None,
) -> StockMove:
    """Inside a change."""
    check_may_issue(by, store, visit, job)
    reason = clean_text(reason, field="reason", longest=500, words="The reason")
    if visit is not None and job is not None:
        raise BadValue("A part goes to a visit or to a job, not to both. Choose one.", field="job")
    if visit is None and job is None and not reason:
        raise BadValue("Neither a visit nor a job is named. Name one, or say in a few words what for.", field="reason")
    if visit is not None:
        visit = standing_visit(visit, by)
        happened_on = happened_on or visit.happened_on
    day = moved_on(store, happened_on)
    if job is not None:
        job = standing_job(job, by)
        not_before(day, job.received_on, f"job {job.code} began")
        if job.finished_on is not None and day > job.finished_on:
            raise AlreadyDone(f"Job {job.code} was finished before that day. Choose an open job.", field="job")
    move = StockMove(
        store=store, part=fresh_part(part), quantity=-pieces(quantity), kind=MoveKind.ISSUE, happened_on=day,
        visit=visit, job=job, condition=condition, reason=reason,
    )  # fmt: skip
    return post(move, by=by, code=code)


def check_may_issue(by: Person | None, store: Store, visit: Visit | None, job: BenchJob | None) -> None:
    check_store(store, by)
    if by is None or may(by, STOCK):
        return
    if by.role == "bench" and job is not None:
        return
    if visit is None or store.person_id != by.pk:
        needed = "to a bench job" if by.role == "bench" else "to a visit, from your own store"
        raise NotAllowed(f"A {by.role} issues parts {needed}. Ask a planner for any other issue.", field="store")


def standing_visit(visit: Visit, by: Person | None) -> Visit:
    """Under its module's lock: a visit that is being struck out takes no more parts."""
    lock_module(visit.module)
    visit = Visit.objects.get(pk=visit.pk)
    if by is not None and not sees(by, visit):
        raise NotAllowed(f"Visit {visit.code} was at a site that is none of yours.", field="visit")
    if visit.struck_out:
        raise AlreadyDone(f"Visit {visit.code} was struck out: {visit.struck_out}. Choose another.", field="visit")
    return visit


def standing_job(job: BenchJob, by: Person | None) -> BenchJob:
    lock_module(job.module)
    job = BenchJob.objects.get(pk=job.pk)
    if by is not None and not sees(by, job):
        raise NotAllowed(f"Job {job.code} is at a depot that is none of yours.", field="job")
    if job.struck_out:
        raise AlreadyDone(f"Job {job.code} was struck out: {job.struck_out}. Choose another.", field="job")
    return job
