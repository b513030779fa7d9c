"""stores.csv: where spares lie."""

from __future__ import annotations

from fleet.models import Store
from fleet.models.codes import natural_key
from fleet.models.mixins import fold
from fleet.transfer import cells
from fleet.transfer.columns import Column, FileKind
from fleet.transfer.known import Known
from fleet.transfer.row import Row


def finish(row: Row, known: Known) -> None:
    row["code_order"] = natural_key(row["code"] or "")
    row["folded"] = fold(row["code"], row["name"])


STORES = FileKind(
    name="stores",
    model=Store,
    noun="store",
    columns=(
        Column("store", "code", cells.code, required=True),
        Column("name", "name", cells.text_up_to(120), empty=""),
        Column("site", "site_id", cells.code, refers="site"),
        Column("person", "person_id", cells.code, refers="person"),
        Column("may_go_below_zero", "may_go_below_zero", cells.yes_no, empty=False),
    ),
    key=("code",),
    key_columns=("store",),
    derived=("code_order", "folded"),
    finish=finish,
)
