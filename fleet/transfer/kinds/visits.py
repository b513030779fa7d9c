"""visits.csv: one crew's attendance at one module on one day."""

from __future__ import annotations

from fleet.models import Left, Visit
from fleet.models.codes import natural_key
from fleet.transfer import cells
from fleet.transfer.columns import Column, FileKind
from fleet.transfer.kinds.belongings import check_module_days, module_of, settle_known_on
from fleet.transfer.known import Known
from fleet.transfer.row import Row


def finish(row: Row, known: Known) -> None:
    row["code_order"] = natural_key(row["code"] or "")
    row["happened_on"] = known.settle_instant(row, "happened_at", "happened_at", row["module_id"])
    row["site_id"] = known.site_on(row["module_id"], row["happened_on"])
    check_module_days(row, "happened_at", row["happened_on"], module_of(row, known))
    settle_known_on(row, known, "known_on", "known_on", row["happened_on"])


VISITS = FileKind(
    name="visits",
    model=Visit,
    noun="visit",
    columns=(
        Column("visit", "code", cells.code, required=True),
        Column("module", "module_id", cells.code, required=True, refers="module", fixed="records of this visit"),
        Column("happened_at", "happened_at", cells.instant, required=True),
        Column("crew", "crew_id", cells.code, refers="person"),
        Column("left", "left", cells.one_of(*Left.values), empty=""),
        Column("known_on", "known_on", cells.day),
        Column("note", "note", cells.text_up_to(4000), empty=""),
    ),
    key=("code",),
    key_columns=("visit",),
    derived=("code_order", "happened_on", "site_id"),
    finish=finish,
)
