"""fittings.csv: one part's stay in a position, the unit of life data."""

from __future__ import annotations

from fleet.models import FAILURE_REASONS, Fitting, FoundBy, RemovalReason
from fleet.models.codes import natural_key
from fleet.transfer import cells
from fleet.transfer.columns import Column, FileKind
from fleet.transfer.kinds.belongings import (
    check_module_days,
    module_of,
    settle_known_on,
    settle_mode,
    settle_position,
    settle_visit,
)
from fleet.transfer.known import UNCLEAR, Known, KnownModule
from fleet.transfer.row import Row

MOST_COUNT = 10**13
WITHOUT_MODE = {RemovalReason.PLANNED, RemovalReason.UPGRADE, RemovalReason.MODULE_WITHDRAWN}
ONLY_REMOVED = ["failed_on", "reason", "mode", "last_good_on", "caused_by", "removed_visit", "removed_known_on",
                "strokes_at_removal", "hours_at_removal", "found_by"]  # fmt: skip


def finish(row: Row, known: Known) -> None:
    row["code_order"] = natural_key(row["code"] or "")
    module = module_of(row, known)
    component = settle_position(row, known, module)
    check_part(row, known, component, module)
    for name in ("fitted_on", "failed_on", "removed_on", "last_good_on"):
        known.check_past(row, name, name, row["module_id"])
    check_module_days(row, "fitted_on", row["fitted_on"], module)
    check_module_days(row, "removed_on", row["removed_on"], module)
    settle_mode(row, known, component)
    settle_visit(row, known, "fitted_visit", "fitted_visit_id", row["module_id"], row["fitted_on"])
    settle_visit(row, known, "removed_visit", "removed_visit_id", row["module_id"], row["removed_on"])
    settle_known_on(row, known, "fitted_known_on", "fitted_known_on", row["fitted_on"])
    if row["removed_on"] is None:
        check_still_fitted(row)
    else:
        settle_known_on(row, known, "removed_known_on", "removed_known_on", row["removed_on"])
        check_removal(row)
    job = known.job_by_id(row["job_id"]) if row["job_id"] is not None else None
    if job is not None and module is not None and job.module != module.id:
        row.say("job", "was of another module. Name one of this module, or leave it empty.")


def check_part(row: Row, known: Known, component: int | None, module: KnownModule | None) -> None:
    part = known.parts.get(row.given.get("part", "").upper()) if row["part_id"] is not None else None
    if part is None or part.component == UNCLEAR or component == UNCLEAR:
        return
    if component is not None and part.component != component:
        row.say("part", "is of another component than this position holds. Name a part for it.")
    elif module is not None and part.types and module.type not in {UNCLEAR, *part.types}:
        row.say("part", "does not fit modules of this type. Add the type to fits_types of the part, or name another.")


def check_still_fitted(row: Row) -> None:
    for column in ONLY_REMOVED:
        if row.given.get(column):
            row.say(column, "is given, yet removed_on is empty. Enter the day it came out, or leave both empty.")


def check_removal(row: Row) -> None:
    reason = row["reason"]
    if not reason:
        row.say("reason", f"is missing. Write one of: {', '.join(RemovalReason.values)}.")
        return
    row.not_before("removed_on", "removed_on", row["fitted_on"], "the day it was fitted")
    if reason in WITHOUT_MODE and row["mode_id"] is not None:
        row.say("mode", f"is given, yet the reason is “{reason}”. Leave the mode empty, or write “failed”.")
    for name in ("failed_on", "last_good_on"):
        if row[name] is None:
            continue
        if reason not in FAILURE_REASONS:
            row.say(name, f"is given, yet the reason is “{reason}”. Leave the day empty, or write “failed”.")
        row.not_before(name, name, row["fitted_on"], "the day it was fitted")
    row.not_after("failed_on", "failed_on", row["removed_on"], "the day it came out")
    row.not_after(
        "last_good_on", "last_good_on", row["failed_on"] or row["removed_on"], "the day it failed or came out"
    )
    if row.get("caused_by_code") and reason != RemovalReason.TAKEN_WITH_ANOTHER:
        row.say("caused_by", f"is given, yet the reason is “{reason}”. Write “taken with another”, or leave it empty.")
    for unit in ("strokes", "hours"):
        begun, ended = row[f"{unit}_at_fit"], row[f"{unit}_at_removal"]
        if begun is not None and ended is not None and ended < begun:
            row.say(f"{unit}_at_removal", f"is below {unit}_at_fit, {begun:g}. Check both numbers.")


FITTINGS = FileKind(
    name="fittings",
    model=Fitting,
    noun="fitting",
    columns=(
        Column("fitting", "code", cells.code, required=True),
        Column("module", "module_id", cells.code, required=True, refers="module"),
        Column("position", "position_code", cells.code, required=True),
        Column("part", "part_id", cells.code, required=True, refers="part"),
        Column("serial", "serial", cells.text_up_to(60), empty=""),
        Column("lot", "lot", cells.text_up_to(60), empty=""),
        Column("fitted_on", "fitted_on", cells.day),
        Column("age_at_fit", "age_at_fit", cells.number(), empty=0.0),
        Column("strokes_at_fit", "strokes_at_fit", cells.whole(0, MOST_COUNT)),
        Column("hours_at_fit", "hours_at_fit", cells.number()),
        Column("fitted_visit", "fitted_visit_code", cells.code),
        Column("fitted_known_on", "fitted_known_on", cells.day),
        Column("failed_on", "failed_on", cells.day),
        Column("removed_on", "removed_on", cells.day),
        Column("strokes_at_removal", "strokes_at_removal", cells.whole(0, MOST_COUNT)),
        Column("hours_at_removal", "hours_at_removal", cells.number()),
        Column("reason", "reason", cells.one_of(*RemovalReason.values), empty=""),
        Column("mode", "mode_code", cells.code),
        Column("found_by", "found_by", cells.one_of(*FoundBy.values), empty=""),
        Column("last_good_on", "last_good_on", cells.day),
        Column("caused_by", "caused_by_code", cells.code),
        Column("removed_visit", "removed_visit_code", cells.code),
        Column("removed_known_on", "removed_known_on", cells.day),
        Column("job", "job_id", cells.code, refers="job"),
        Column("struck_out", "struck_out", cells.text_up_to(500), empty=""),
        Column("note", "note", cells.text_up_to(4000), empty=""),
    ),
    key=("code",),
    key_columns=("fitting",),
    derived=("code_order", "position_id", "mode_id", "fitted_visit_id", "removed_visit_id", "caused_by_id"),
    extra={"caused_by_code": "text"},
    finish=finish,
)
