"""findings.csv: what was seen or done at a position without changing its part."""

from __future__ import annotations

from fleet.models import Finding, FoundKind
from fleet.transfer import cells
from fleet.transfer.columns import Column, FileKind
from fleet.transfer.kinds.belongings import settle_mode, settle_position, settle_visit
from fleet.transfer.known import Known
from fleet.transfer.row import Row


def finish(row: Row, known: Known) -> None:
    visit = settle_visit(row, known, "visit", "visit_id", None)
    row["module_id"] = visit.module if visit else None
    module = known.module_by_id(visit.module) if visit else None
    component = settle_position(row, known, module)
    settle_mode(row, known, component)
    if row["finding"] == FoundKind.NOTHING and row["mode_id"] is not None:
        row.say("mode", "is given, yet nothing was found. Leave the mode empty.")


FINDINGS = FileKind(
    name="findings",
    model=Finding,
    noun="finding",
    columns=(
        Column("visit", "visit_code", cells.code, required=True),
        Column("position", "position_code", cells.code, required=True),
        Column("finding", "finding", cells.one_of(*FoundKind.values), required=True),
        Column("mode", "mode_code", cells.code),
        Column("note", "note", cells.text_up_to(4000), empty=""),
    ),
    key=("visit_id", "position_id", "finding", "mode_id"),
    key_columns=("visit", "position", "finding", "mode"),
    derived=("visit_id", "position_id", "mode_id"),
    extra={"module_id": "bigint"},
    finish=finish,
)
