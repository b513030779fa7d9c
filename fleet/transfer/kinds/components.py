"""components.csv and modes.csv: sorts of part, and how they fail."""

from __future__ import annotations

from fleet.models import Clock, Component, FailureMode
from fleet.models.codes import natural_key
from fleet.transfer import cells
from fleet.transfer.columns import Column, FileKind
from fleet.transfer.known import Known
from fleet.transfer.row import Row


def finish(row: Row, known: Known) -> None:
    row["code_order"] = natural_key(row["code"] or "")


COMPONENTS = FileKind(
    name="components",
    model=Component,
    noun="component",
    columns=(
        Column("component", "code", cells.code, required=True),
        Column("name", "name", cells.text_up_to(120), empty=""),
        Column("clock", "clock", cells.one_of(*Clock.values), required=True),
    ),
    key=("code",),
    key_columns=("component",),
    derived=("code_order",),
    finish=finish,
)

MODES = FileKind(
    name="modes",
    model=FailureMode,
    noun="failure mode",
    columns=(
        Column("component", "component_id", cells.code, required=True, refers="component"),
        Column("mode", "code", cells.code, required=True),
        Column("name", "name", cells.text_up_to(120), empty=""),
        Column("mechanism", "mechanism", cells.text_up_to(120), empty=""),
        Column("cause", "cause", cells.text_up_to(120), empty=""),
        Column("goes_to_bench", "goes_to_bench", cells.yes_no, empty=False),
    ),
    key=("component_id", "code"),
    key_columns=("component", "mode"),
    derived=("code_order",),
    finish=finish,
)
