"""types.csv and positions.csv: models of module, and the places in them that hold a part."""

from __future__ import annotations

from fleet.models import ModuleType, Position
from fleet.models.codes import natural_key
from fleet.transfer import cells
from fleet.transfer.columns import Column, FileKind
from fleet.transfer.known import Known
from fleet.transfer.row import Row


def finish(row: Row, known: Known) -> None:
    row["code_order"] = natural_key(row["code"] or "")


TYPES = FileKind(
    name="types",
    model=ModuleType,
    noun="module type",
    columns=(
        Column("type", "code", cells.code, required=True),
        Column("name", "name", cells.text_up_to(120), empty=""),
        Column("cautions", "cautions", cells.text_up_to(4000), empty=""),
    ),
    key=("code",),
    key_columns=("type",),
    derived=("code_order",),
    finish=finish,
)

POSITIONS = FileKind(
    name="positions",
    model=Position,
    noun="position",
    columns=(
        Column("type", "type_id", cells.code, required=True, refers="type"),
        Column("position", "code", cells.code, required=True),
        Column(
            "component",
            "component_id",
            cells.code,
            required=True,
            refers="component",
            fixed="fittings of this position",
        ),
        Column("order", "order", cells.whole(), empty=0),
    ),
    key=("type_id", "code"),
    key_columns=("type", "position"),
    derived=("code_order",),
    finish=finish,
)
