"""Counters in their order, files and book together: named serials, faces that fall, roll-overs without a past."""

from __future__ import annotations

from typing import Any

from fleet.models import Restart
from fleet.transfer.columns import FileKind
from fleet.transfer.job import Job
from fleet.transfer.staging import fetch, index_stage, run

# Rows of the files come after those of the book at the same instant, as the actions would have entered them.
BOTH = """
SELECT row, module_id, read_at, {late} + row AS place, counter, restarts, strokes, hours
FROM stage_readings WHERE bad = 0 AND id < 0 AND struck_out = '' AND (strokes IS NOT NULL OR hours IS NOT NULL)
UNION ALL
SELECT NULL, module_id, read_at, id, counter, restarts, strokes, hours
FROM fleet_reading AS book WHERE struck_out = '' AND (strokes IS NOT NULL OR hours IS NOT NULL)
  AND module_id IN (SELECT module_id FROM stage_readings WHERE module_id > 0 AND id < 0)
"""
LATE = 2**52
IN_ORDER = """
WITH both_sides AS ({both}), ordered AS (
    SELECT both_sides.*,
        LAG(counter) OVER w AS counter_before, LEAD(counter) OVER w AS counter_after,
        LEAD(restarts) OVER w AS restarts_after, LAG(row) OVER w AS row_before
    FROM both_sides WINDOW w AS (PARTITION BY module_id ORDER BY read_at, place)
)
SELECT row, counter, restarts, counter_before, counter_after, restarts_after FROM ordered
WHERE row IS NOT NULL AND (restarts = '{rolled}' OR (counter_before = counter_after AND counter <> counter_before))
ORDER BY row
"""
FALLS = """
WITH both_sides AS ({both}), marked AS (
    SELECT both_sides.*,
        CASE WHEN restarts <> '' OR counter <> LAG(counter, 1, counter) OVER w THEN 1 ELSE 0 END AS begins
    FROM both_sides WINDOW w AS (PARTITION BY module_id ORDER BY read_at, place)
), segments AS (
    SELECT marked.*, SUM(begins) OVER (PARTITION BY module_id ORDER BY read_at, place) AS segment FROM marked
), faces AS (
    SELECT row, {unit} AS face, LAG({unit}) OVER w AS face_before, LAG(read_at) OVER w AS read_before,
           LAG(row) OVER w AS row_before
    FROM segments WHERE {unit} IS NOT NULL
    WINDOW w AS (PARTITION BY module_id, segment ORDER BY read_at, place)
)
SELECT row, row_before, face, face_before, read_before FROM faces
WHERE face < face_before AND (row IS NOT NULL OR row_before IS NOT NULL) ORDER BY COALESCE(row, row_before)
"""


def both() -> str:
    return BOTH.format(late=LATE)


def name_counters(kind: FileKind) -> None:
    """A reading without a serial is of the counter read before it, as when it is entered on a screen."""
    named = (
        "SELECT module_id FROM stage_readings WHERE counter <> '' "
        "UNION SELECT module_id FROM fleet_reading WHERE counter <> ''"
    )
    rows = fetch(
        f"SELECT row, module_id, counter FROM ({both()}) AS readings WHERE module_id IN ({named}) "
        "AND module_id IN (SELECT module_id FROM stage_readings WHERE counter = '') ORDER BY module_id, read_at, place"
    )
    last: dict[int, str] = {}
    for row, module, counter in rows:
        if counter:
            last[module] = counter
        elif row is not None and last.get(module):
            run(f"UPDATE {kind.stage} SET counter = %s WHERE row = %s", [last[module], row])


def check_readings(kind: FileKind, job: Job) -> None:
    index_stage(kind, "module_id", "read_at")
    for row, counter, restarts, before, after, restarts_after in fetch(
        IN_ORDER.format(both=both(), rolled=Restart.ROLLED_OVER.value)
    ):
        report_order(kind, row, counter, restarts, before, after, restarts_after, job)
    for unit, face in (("strokes", "Counter"), ("hours", "Hour meter")):
        for row, row_before, value, last, read_before in fetch(FALLS.format(both=both(), unit=unit)):
            where = f"the last reading, {last:g} on {str(read_before)[:10]}"
            if row is not None:
                remedy = f"Was the {face.lower()} changed? Name its serial, or say in restarts why it fell."
                job.say(kind, row, unit, value, f"is below {where}. {remedy}")
            else:
                job.say(
                    kind,
                    row_before,
                    unit,
                    last,
                    f"is above a later reading in the book, {value:g}. Check number and day.",
                )


def report_order(
    kind: FileKind, row: int, counter: str, restarts: str, before: Any, after: Any, restarts_after: Any, job: Job
) -> None:
    if restarts == Restart.ROLLED_OVER:
        if before is None:
            job.say(
                kind,
                row,
                "restarts",
                restarts,
                "is given for the first reading. Nothing can have rolled over: leave it empty.",
            )
        elif counter != before:
            job.say(
                kind,
                row,
                "restarts",
                restarts,
                "is given with a new serial. Write the serial or the roll-over, not both.",
            )
    if before is not None and before == after and counter != before and not restarts_after:
        job.say(
            kind,
            row,
            "counter",
            counter,
            f"lies between two readings of counter {before or 'without a serial'}. Check serial and day.",
        )
