"""parts.csv: catalogue items."""

from __future__ import annotations

from fleet.models import Part, PartState
from fleet.models.codes import natural_key
from fleet.models.mixins import fold
from fleet.transfer import cells
from fleet.transfer.columns import Column, FileKind
from fleet.transfer.known import Known
from fleet.transfer.row import Row


def finish(row: Row, known: Known) -> None:
    row["code_order"] = natural_key(row["code"] or "")
    row["folded"] = fold(row["code"], row["name"])
    types = row.get("linked") or ()
    for code in types:
        if code not in known.types:
            row.say(
                "fits_types", f"names type {code}, which is neither in the files nor in the book. Add it to types.csv."
            )
    row["linked"] = " ".join(types)
    if row.get("supersedes_code") and row["supersedes_code"] == row["code"]:
        row.say("supersedes", "is the part itself. Name the part before it, or leave it empty.")


PARTS = FileKind(
    name="parts",
    model=Part,
    noun="part",
    columns=(
        Column("part", "code", cells.code, required=True),
        Column(
            "component", "component_id", cells.code, required=True, refers="component", fixed="fittings of this part"
        ),
        Column("revision", "revision", cells.text_up_to(20), empty=""),
        Column("name", "name", cells.text_up_to(120), empty=""),
        Column("supersedes", "supersedes_code", cells.code),
        Column("fits_types", "linked", cells.codes, empty=()),
        Column("state", "state", cells.one_of(*PartState.values), empty=PartState.CURRENT.value),
        Column("supplier", "supplier", cells.text_up_to(120), empty=""),
        Column("unit_cost", "unit_cost", cells.money),
        Column("lead_time_days", "lead_time_days", cells.whole(0, 3650)),
        Column("pack", "pack", cells.whole(1), empty=1),
        Column("minimum", "minimum", cells.whole(), empty=0),
    ),
    key=("code",),
    key_columns=("part",),
    derived=("code_order", "folded", "supersedes_id"),
    extra={"linked": "text", "supersedes_code": "text"},
    finish=finish,
)
