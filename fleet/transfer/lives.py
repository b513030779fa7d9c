"""Sets of lives come in once: a set that the book has must be the same, life for life."""

from __future__ import annotations

from fleet.transfer.columns import FileKind
from fleet.transfer.job import Job
from fleet.transfer.staging import fetch, quoted, run

COLUMNS = [
    "set_id",
    "component_id",
    "part_id",
    "age",
    "observed",
    "entry_age",
    "last_good_age",
    "count",
    "site",
    "clock",
]


def check_sets(kind: FileKind, job: Job) -> None:
    names = quoted(*COLUMNS)
    mine = f"SELECT {names}, COUNT(*) FROM {kind.stage} WHERE set_id > 0 GROUP BY {names}"
    named = f"SELECT set_id FROM {kind.stage} WHERE set_id > 0"
    book = f"SELECT {names}, COUNT(*) FROM {kind.table} WHERE set_id IN ({named}) GROUP BY {names}"
    different = {row[0] for row in fetch(f"SELECT * FROM ({mine} EXCEPT {book}) AS fresh")}
    different |= {row[0] for row in fetch(f"SELECT * FROM ({book} EXCEPT {mine}) AS gone")}
    codes = {pk: code for code, pk in job.known.life_sets.items()}
    for pk in sorted(different):
        row = fetch(f"SELECT MIN(row) FROM {kind.stage} WHERE set_id = %s", [pk])[0][0]
        job.say(
            kind, row, "set", codes[pk], "is in the book with other lives. A set comes in once: give it another name."
        )
    run(f"UPDATE {kind.stage} SET id = row WHERE set_id > 0")
