"""sites.csv: places where modules stand."""

from __future__ import annotations

from fleet.models import Site, SiteKind
from fleet.models.codes import natural_key
from fleet.models.mixins import fold
from fleet.transfer import cells
from fleet.transfer.columns import Column, FileKind
from fleet.transfer.known import Known
from fleet.transfer.row import Row


def finish(row: Row, known: Known) -> None:
    row["code_order"] = natural_key(row["code"] or "")
    row["folded"] = fold(row["code"], row["name"])
    known.check_past(row, "records_from", "records_from")
    row.not_too_far("next_visit_on")


SITES = FileKind(
    name="sites",
    model=Site,
    noun="site",
    columns=(
        Column("site", "code", cells.code, required=True),
        Column("name", "name", cells.text_up_to(120), empty=""),
        Column("kind", "kind", cells.one_of(*SiteKind.values), empty=SiteKind.FIELD.value),
        Column("zone", "zone", cells.zone_name, empty=""),
        Column("records_from", "records_from", cells.day),
        Column("strokes_per_day", "strokes_per_day", cells.number(0, 1e7)),
        Column("hours_per_day", "hours_per_day", cells.number(0, 24)),
        Column("reports_at_once", "reports_at_once", cells.yes_no),
        Column("next_visit_on", "next_visit_on", cells.day),
        Column("visit_every_days", "visit_every_days", cells.whole(1, 3650)),
    ),
    key=("code",),
    key_columns=("site",),
    derived=("code_order", "folded"),
    finish=finish,
)
