"""readings.csv: faces of counters and meters, and measured play."""

from __future__ import annotations

from fleet.models import Reading, Restart
from fleet.models.reading import MOST_STROKES
from fleet.transfer import cells
from fleet.transfer.columns import Column, FileKind
from fleet.transfer.kinds.belongings import (
    check_module_days,
    module_of,
    settle_known_on,
    settle_position,
    settle_visit,
)
from fleet.transfer.known import Known
from fleet.transfer.row import Row


def finish(row: Row, known: Known) -> None:
    module = module_of(row, known)
    day = known.settle_instant(row, "read_at", "read_at", row["module_id"])
    row["site_id"] = known.site_on(row["module_id"], day)
    check_module_days(row, "read_at", day, module)
    settle_position(row, known, module)
    settle_visit(row, known, "visit", "visit_id", row["module_id"])
    settle_known_on(row, known, "known_on", "known_on", day)
    says_counter = row["strokes"] is not None or row["hours"] is not None
    if not says_counter and row["play_mm"] is None:
        row.say("strokes", "is empty, and so are hours and play_mm. Enter what was read.")
    if row["play_mm"] is not None and not row.given.get("position"):
        row.say("position", "is missing. Enter the position whose play was measured.")
    if row["restarts"] and not says_counter:
        row.say("restarts", "is given without strokes or hours. Enter what the counter said then, or leave it empty.")


READINGS = FileKind(
    name="readings",
    model=Reading,
    noun="reading",
    columns=(
        Column("module", "module_id", cells.code, required=True, refers="module"),
        Column("read_at", "read_at", cells.instant, required=True),
        Column("counter", "counter", cells.text_up_to(60), empty=""),
        Column("restarts", "restarts", cells.one_of(*Restart.values), empty=""),
        Column("strokes", "strokes", cells.whole(0, MOST_STROKES)),
        Column("hours", "hours", cells.number(0, 1e7)),
        Column("position", "position_code", cells.code),
        Column("play_mm", "play_mm", cells.number(0, 1000)),
        Column("visit", "visit_code", cells.code),
        Column("known_on", "known_on", cells.day),
        Column("struck_out", "struck_out", cells.text_up_to(500), empty=""),
    ),
    key=("module_id", "read_at", "counter", "position_id", "struck_out"),
    key_columns=("module", "read_at", "counter", "position"),
    derived=("position_id", "visit_id", "site_id"),
    finish=finish,
)
