"""What single rows cannot tell: stays that overlap, in the files and in the book together."""

from __future__ import annotations

from typing import Any

from fleet.transfer.columns import FileKind
from fleet.transfer.job import Job
from fleet.transfer.staging import fetch, index_stage

LEAST, MOST = "0001-01-01", "9999-12-31"
# Zero-length stays may touch others but not lie within one; so may the actions' own check.
OVERLAPS = """
WITH stays AS (
    SELECT row, id, {same}, COALESCE({start}, '{least}') AS begun, COALESCE({end}, '{most}') AS ended
    FROM {stage} WHERE bad = 0 AND {named} {standing}
    UNION ALL
    SELECT NULL, book.id, {book_same}, COALESCE(book.{start}, '{least}'), COALESCE(book.{end}, '{most}')
    FROM {table} AS book
    WHERE book.struck_out = '' AND book.module_id IN (SELECT module_id FROM {stage} WHERE module_id > 0)
      AND NOT EXISTS (SELECT 1 FROM {stage} AS mine WHERE mine.id = book.id)
), ordered AS (
    SELECT row, begun,
        MAX(ended) OVER (PARTITION BY {same} ORDER BY begun, ended, id
                         ROWS BETWEEN UNBOUNDED PRECEDING AND 1 PRECEDING) AS reached,
        LAG(row) OVER (PARTITION BY {same} ORDER BY begun, ended, id) AS row_before,
        LAG(ended) OVER (PARTITION BY {same} ORDER BY begun, ended, id) AS ended_before
    FROM stays
)
SELECT row, row_before, reached, ended_before, begun FROM ordered WHERE reached > begun
ORDER BY COALESCE(row, row_before)
"""


def check_overlaps(kind: FileKind, same: list[str], start: str, end: str, words: str, job: Job) -> None:
    """Reports each row that begins before an earlier stay of the same place has ended."""
    index_stage(kind, *same, start)
    standing = "AND struck_out = ''" if "struck_out" in kind.staged else ""
    query = OVERLAPS.format(
        stage=kind.stage,
        table=kind.table,
        same=", ".join(same),
        book_same=", ".join(f"book.{name}" for name in same),
        start=start,
        end=end,
        least=LEAST,
        most=MOST,
        standing=standing,
        named=" AND ".join(f"{name} IS NOT NULL" for name in same),
    )
    for row, row_before, reached, ended_before, begun in fetch(query):
        other = row_before if row is not None else None
        reported = row if row is not None else row_before
        if reported is None:
            continue  # both stand in the book: nothing that these files could put right
        where = f" (row {other})" if other is not None and ended_before == reached else ""
        ended = "has no end" if is_most(reached) else f"lasts until {short(reached)}"
        later = f"the one in the book that begins {short(begun)}" if row is None else f"one that {ended}{where}"
        job.say(
            kind, reported, start, "", f"overlaps {words}: {later}. Correct the days, or end the earlier one first."
        )


def is_most(value: Any) -> bool:
    return str(value).startswith("9999")


def short(value: Any) -> str:
    return "at an unknown day" if str(value).startswith("0001") else f"on {str(value)[:16].removesuffix(' 00:00')}"
