"""bench.csv, hours.csv and capacity.csv: modules on the bench, hours booked, hours that there are."""

from __future__ import annotations

import datetime as dt

from fleet.models import BenchCapacity, BenchHours, BenchJob, Outcome, Stage
from fleet.models.bench import MOST_HOURS_A_WEEK
from fleet.models.codes import natural_key
from fleet.transfer import cells
from fleet.transfer.columns import Column, FileKind
from fleet.transfer.kinds.belongings import check_module_days, module_of
from fleet.transfer.known import UNCLEAR, Known, Stay
from fleet.transfer.row import Row


def finish(row: Row, known: Known) -> None:
    row["code_order"] = natural_key(row["code"] or "")
    module = module_of(row, known)
    for name in ("received_on", "started_on", "finished_on"):
        known.check_past(row, name, name, row["module_id"])
        check_module_days(row, name, row[name], module)
    row.not_before("started_on", "started_on", row["received_on"], "the day it was received")
    row.not_before(
        "finished_on", "finished_on", row["started_on"] or row["received_on"], "the day before it in the job"
    )
    settle_stage(row)
    if module is not None and module.id != UNCLEAR and row["received_on"] is not None:
        settle_depot(row, known)


def settle_stage(row: Row) -> None:
    """Without a stage the days tell it."""
    ended = row["finished_on"] is not None
    if row["stage"] is None:
        row["stage"] = (
            Stage.FINISHED if ended else Stage.ON_THE_BENCH if row["started_on"] is not None else Stage.RECEIVED
        ).value
    if ended != (row["stage"] == Stage.FINISHED):
        row.say("stage", "and finished_on do not agree. A finished job has a day, an open one has none.")
    if ended and not row["outcome"]:
        row.say("outcome", f"is missing: the job is finished. Write one of: {', '.join(Outcome.values)}.")
    if not ended and row["outcome"]:
        row.say("outcome", "is given, yet finished_on is empty. Enter the day it ended, or leave both empty.")
    if row["waits_for_id"] is not None and row["stage"] != Stage.WAITING_FOR_PARTS:
        row.say("waits_for", f"names a part, yet the stage is {row['stage']}. Write “waiting for parts”, or no part.")


def settle_depot(row: Row, known: Known) -> None:
    """The depot where the module stood on the day it was received, for the whole of the job."""
    stays = [stay for stay in known.stays.get(row["module_id"], ()) if stay.depot and stay.touches(row["received_on"])]
    if row["depot_id"] is None and stays:
        # On a day of moving, the depot it came to.
        row["depot_id"] = max(stays, key=lambda stay: stay.from_on).site
    if row["depot_id"] is None:
        row.say("depot", "is not known: the module stood at no depot then. Add its stay to placements.csv.")
    elif not covered(known.stays.get(row["module_id"], []), row["depot_id"], row["received_on"], row["finished_on"]):
        row.say(
            "received_on",
            "lies outside the module's stay at this depot, or the job goes on after it. "
            "Correct the days, or the stay in placements.csv.",
        )


def covered(stays: list[Stay], depot: int, first: dt.date, last: dt.date | None) -> bool:
    reached, begun = first, False
    for stay in sorted(stays, key=lambda stay: stay.from_on):
        if stay.site == depot and stay.from_on <= reached and (stay.to_on or dt.date.max) >= reached:
            reached, begun = stay.to_on or dt.date.max, True
    return begun and reached >= (last or dt.date.max)


def finish_hours(row: Row, known: Known) -> None:
    known.check_past(row, "day", "day")
    job = known.job_by_id(row["job_id"]) if row["job_id"] is not None else None
    if job is None:
        return
    row.not_before("day", "day", job.received_on, "the day the module was received")
    row.not_after("day", "day", job.finished_on, "the day the job was finished")
    if row["hours"] == 0:
        row.say("hours", "is no time at all. Leave the row out.")


def finish_capacity(row: Row, known: Known) -> None:
    row.not_too_far("week")


BENCH = FileKind(
    name="bench",
    model=BenchJob,
    noun="job",
    columns=(
        Column("job", "code", cells.code, required=True),
        Column("module", "module_id", cells.code, required=True, refers="module"),
        Column("depot", "depot_id", cells.code, refers="site"),
        Column("reason", "reason", cells.text_up_to(500), empty=""),
        Column("received_on", "received_on", cells.day, required=True),
        Column("stage", "stage", cells.one_of(*Stage.values)),
        Column("started_on", "started_on", cells.day),
        Column("finished_on", "finished_on", cells.day),
        Column("outcome", "outcome", cells.one_of(*Outcome.values), empty=""),
        Column("waits_for", "waits_for_id", cells.code, refers="part"),
        Column("note", "note", cells.text_up_to(4000), empty=""),
    ),
    key=("code",),
    key_columns=("job",),
    derived=("code_order",),
    finish=finish,
)

HOURS = FileKind(
    name="hours",
    model=BenchHours,
    noun="hours",
    columns=(
        Column("job", "job_id", cells.code, required=True, refers="job"),
        Column("person", "person_id", cells.code, required=True, refers="person"),
        Column("day", "day", cells.day, required=True),
        Column("hours", "hours", cells.number(0, 24), required=True),
    ),
    key=("job_id", "person_id", "day"),
    key_columns=("job", "person", "day"),
    finish=finish_hours,
)

CAPACITY = FileKind(
    name="capacity",
    model=BenchCapacity,
    noun="week",
    columns=(
        Column("week", "week", cells.week, required=True),
        Column("hours", "hours", cells.number(0, MOST_HOURS_A_WEEK), required=True),
    ),
    key=("week",),
    key_columns=("week",),
    finish=finish_capacity,
)
