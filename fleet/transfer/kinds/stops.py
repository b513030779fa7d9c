"""stops.csv: modules standing still."""

from __future__ import annotations

from fleet.models import Stop
from fleet.transfer import cells
from fleet.transfer.columns import Column, FileKind
from fleet.transfer.kinds.belongings import check_module_days, module_of, settle_known_on, settle_visit
from fleet.transfer.known import Known
from fleet.transfer.row import Row


def finish(row: Row, known: Known) -> None:
    day = known.settle_instant(row, "stopped_at", "stopped_at", row["module_id"])
    known.settle_instant(row, "running_at", "running_at", row["module_id"])
    row["site_id"] = known.site_on(row["module_id"], day)
    check_module_days(row, "stopped_at", day, module_of(row, known))
    settle_visit(row, known, "visit", "visit_id", row["module_id"])
    settle_known_on(row, known, "known_on", "known_on", day)
    if row["running_at"] is not None and row["stopped_at"] is not None and row["running_at"] < row["stopped_at"]:
        row.say("running_at", "lies before it stopped. Enter a time from then on.")


STOPS = FileKind(
    name="stops",
    model=Stop,
    noun="stop",
    columns=(
        Column("module", "module_id", cells.code, required=True, refers="module"),
        Column("stopped_at", "stopped_at", cells.instant, required=True),
        Column("running_at", "running_at", cells.instant),
        Column("reported_by", "reported_by_id", cells.code, refers="person"),
        Column("known_on", "known_on", cells.day),
        Column("visit", "visit_code", cells.code),
        Column("note", "note", cells.text_up_to(4000), empty=""),
    ),
    key=("module_id", "stopped_at"),
    key_columns=("module", "stopped_at"),
    derived=("visit_id", "site_id"),
    finish=finish,
)
