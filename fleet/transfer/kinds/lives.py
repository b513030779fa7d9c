"""lives.csv: life data without histories, for analysis only. Equal rows are separate lives; a set comes in once."""

from __future__ import annotations

from fleet.models import Clock, SetLife
from fleet.transfer import cells
from fleet.transfer.columns import Column, FileKind
from fleet.transfer.known import UNCLEAR, Known
from fleet.transfer.row import Row


def finish(row: Row, known: Known) -> None:
    code = row.values.pop("lifeset_code", None)
    row["set_id"] = None
    if code is not None:
        new = known.new_life_sets
        row["set_id"] = known.life_sets.get(code) or new.setdefault(code, -1 - len(new))
    part = known.parts.get(row.given.get("part", "").upper()) if row["part_id"] is not None else None
    if part is not None and row["component_id"] is not None and part.component not in {UNCLEAR, row["component_id"]}:
        row.say("part", "is of another component. Name a part of this component, or leave it empty.")
    row["clock"] = row["clock"] or known.clocks.get(row["component_id"] or 0)
    age = row["age"]
    if age is None:
        return
    if row["entry_age"] > age or (row["entry_age"] == age and age > 0):
        row.say("entry_age", f"is not below the age, {age:g}. A life is watched from its entry to its age.")
    if row["last_good_age"] is not None and row["last_good_age"] > age:
        row.say("last_good_age", f"is above the age, {age:g}. Enter an age up to it, or leave it empty.")


LIVES = FileKind(
    name="lives",
    model=SetLife,
    noun="life",
    columns=(
        Column("set", "lifeset_code", cells.code, required=True),
        Column("component", "component_id", cells.code, required=True, refers="component"),
        Column("part", "part_id", cells.code, refers="part"),
        Column("age", "age", cells.number(), required=True),
        Column("observed", "observed", cells.yes_no, required=True),
        Column("entry_age", "entry_age", cells.number(), empty=0.0),
        Column("last_good_age", "last_good_age", cells.number()),
        Column("count", "count", cells.whole(1), empty=1),
        Column("site", "site", cells.code, empty=""),
        Column("clock", "clock", cells.one_of(*Clock.values)),
    ),
    key=(),
    derived=("set_id",),
    finish=finish,
)
