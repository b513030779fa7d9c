"""Stays that the files change still cover the bench jobs of the book."""

from __future__ import annotations

from fleet.transfer.columns import FileKind
from fleet.transfer.job import Job
from fleet.transfer.kinds.bench import covered
from fleet.transfer.staging import fetch


def check_jobs_keep_their_stays(kind: FileKind, job: Job) -> None:
    """Only where an update may shorten a stay; jobs of the files were held against their stays when they were read."""
    if not job.update:
        return
    rows = dict(fetch(f"SELECT module_id, MIN(row) FROM {kind.stage} WHERE id > 0 AND bad = 0 GROUP BY module_id"))
    for code, each in job.known.jobs.items():
        if each.id > 0 and each.module in rows:
            stays = job.known.stays.get(each.module, [])
            if not covered(stays, each.depot, each.received_on, each.finished_on):
                message = f"leaves bench job {code} without its stay at the depot. Correct the days, or the job first."
                job.say(kind, rows[each.module], "to_on", "", message)
