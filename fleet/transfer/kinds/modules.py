"""modules.csv and placements.csv: built units, and their stays at sites."""

from __future__ import annotations

from fleet.models import Module, Placement
from fleet.models.codes import natural_key
from fleet.transfer import cells
from fleet.transfer.columns import Column, FileKind
from fleet.transfer.known import Known
from fleet.transfer.row import Row


def finish_module(row: Row, known: Known) -> None:
    row["code_order"] = natural_key(row["code"] or "")
    for name in ("built_on", "records_from", "scrapped_on"):
        known.check_past(row, name, name)
    row.not_before("scrapped_on", "scrapped_on", row["built_on"], "the day it was built")


MODULES = FileKind(
    name="modules",
    model=Module,
    noun="module",
    columns=(
        Column("module", "code", cells.code, required=True),
        Column("type", "type_id", cells.code, required=True, refers="type", fixed="fittings of this module"),
        Column("built_on", "built_on", cells.day),
        Column("records_from", "records_from", cells.day),
        Column("scrapped_on", "scrapped_on", cells.day),
    ),
    key=("code",),
    key_columns=("module",),
    derived=("code_order",),
    finish=finish_module,
)


def finish_placement(row: Row, known: Known) -> None:
    for name in ("from_on", "to_on"):
        known.check_past(row, name, name)
    row.not_before("to_on", "to_on", row["from_on"], "the day it came")


PLACEMENTS = FileKind(
    name="placements",
    model=Placement,
    noun="placement",
    columns=(
        Column("module", "module_id", cells.code, required=True, refers="module"),
        Column("site", "site_id", cells.code, required=True, refers="site"),
        Column("bay", "bay", cells.text_up_to(40), empty=""),
        Column("from_on", "from_on", cells.day, required=True),
        Column("to_on", "to_on", cells.day),
    ),
    key=("module_id", "site_id", "from_on"),
    key_columns=("module", "site", "from_on"),
    finish=finish_placement,
)
