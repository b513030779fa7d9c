"""Where fittings name no visit, one is made for each module and day; a visit of that day is taken if there is one."""

from __future__ import annotations

import datetime as dt
import hashlib
from functools import cache
from typing import Any

from fleet.models.codes import CODE_LENGTH, natural_key
from fleet.transfer.cells import NOON, utc_text
from fleet.transfer.job import FileReport, Job
from fleet.transfer.kinds import FITTINGS, VISITS
from fleet.transfer.staging import (
    analyse,
    as_day,
    create_stage,
    fetch,
    fill,
    index_stage,
    run,
    stage_exists,
    value_of,
)

WITHOUT = """
SELECT module_id, {day} AS day, MIN({known}) AS known FROM stage_fittings
WHERE (id < 0 OR differs = 1) AND bad = 0 AND struck_out = '' AND {day} IS NOT NULL AND {visit} IS NULL
AND NOT (job_id IS NOT NULL AND EXISTS (SELECT 1 FROM bench_days WHERE bench_days.module_id = stage_fittings.module_id
    AND {day} >= received_on AND {day} <= finished_on))
GROUP BY module_id, {day}
"""
FITTED = WITHOUT.format(day="fitted_on", known="fitted_known_on", visit="fitted_visit_id")
REMOVED = WITHOUT.format(day="removed_on", known="removed_known_on", visit="removed_visit_id")
# The first visit of the day: of the files before that of the book.
DAYS = f"""
CREATE TEMPORARY TABLE visit_days AS
SELECT module_id, day, MIN(known) AS known,
    COALESCE(
        (SELECT MAX(mine.id) FROM stage_visits AS mine WHERE mine.module_id = needed.module_id
            AND mine.happened_on = needed.day AND mine.bad = 0),
        (SELECT MIN(book.id) FROM fleet_visit AS book WHERE book.module_id = needed.module_id
            AND book.happened_on = needed.day AND book.struck_out = '')
    ) AS visit_id
FROM ({FITTED} UNION ALL {REMOVED}) AS needed
GROUP BY module_id, day
"""
TAKE = """
UPDATE stage_fittings SET {visit} = (
    SELECT visit_id FROM visit_days WHERE visit_days.module_id = stage_fittings.module_id AND visit_days.day = {day}
) WHERE (id < 0 OR differs = 1) AND bad = 0 AND struck_out = '' AND {day} IS NOT NULL AND {visit} IS NULL
AND NOT (job_id IS NOT NULL AND EXISTS (SELECT 1 FROM bench_days WHERE bench_days.module_id = stage_fittings.module_id
    AND {day} >= received_on AND {day} <= finished_on))
"""
BATCH = 5000


def make_visits(job: Job) -> None:
    """Adds the missing visits to the staging table of visits, and names them in the fittings."""
    if VISITS not in job.kinds:
        create_stage(VISITS)
        job.kinds.insert(job.kinds.index(FITTINGS), VISITS)
        job.reports[VISITS.name] = FileReport(VISITS.file)
    index_stage(VISITS, "module_id", "happened_on")
    index_stage(FITTINGS, "module_id", "fitted_on")
    index_stage(FITTINGS, "module_id", "removed_on")
    analyse(VISITS)
    note_bench_days()
    run("DROP TABLE IF EXISTS visit_days")
    run(DAYS)
    run("CREATE INDEX visit_days_place ON visit_days (module_id, day)")
    add_missing(job)
    for visit, day in (("fitted_visit_id", "fitted_on"), ("removed_visit_id", "removed_on")):
        run(TAKE.format(visit=visit, day=day))
    analyse(VISITS)
    analyse(FITTINGS)


def note_bench_days() -> None:
    """What was changed during a bench job belongs to the job: no visit is made for it."""
    run("DROP TABLE IF EXISTS bench_days")
    job = "SELECT module_id, received_on, COALESCE(finished_on, '9999-12-31') AS finished_on FROM"
    staged = f"UNION ALL {job} stage_bench WHERE bad = 0" if stage_exists("stage_bench") else ""
    named = "WHERE struck_out = '' AND id IN (SELECT job_id FROM stage_fittings WHERE job_id > 0)"
    modules = "OR struck_out = '' AND module_id IN (SELECT module_id FROM stage_fittings WHERE job_id IS NOT NULL)"
    run(f"CREATE TEMPORARY TABLE bench_days AS {job} fleet_benchjob {named} {modules} {staged}")
    run("CREATE INDEX bench_days_place ON bench_days (module_id, received_on)")


def add_missing(job: Job) -> None:
    codes = {module.id: code for code, module in job.known.modules.items()}
    first = 1 + (value_of("SELECT MAX(row) FROM stage_visits") or 0)
    missing = fetch("SELECT module_id, day, known FROM visit_days WHERE visit_id IS NULL ORDER BY module_id, day")
    noons = Noons(job)
    for start in range(0, len(missing), BATCH):
        some = list(enumerate(missing[start : start + BATCH], start=first + start))
        fill(
            VISITS,
            [made_visit(row, codes[module], module, as_day(day), known, noons) for row, (module, day, known) in some],
        )
    job.reports[VISITS.name].made = len(missing)
    settle_taken_codes(first)
    run(
        "UPDATE visit_days SET visit_id = (SELECT id FROM stage_visits AS made WHERE made.row >= %s AND "
        "made.module_id = visit_days.module_id AND made.happened_on = visit_days.day) WHERE visit_id IS NULL",
        [first],
    )


class Noons:
    """Noon of a day in a zone, as both engines keep it."""

    def __init__(self, job: Job) -> None:
        self.known = job.known
        self.texts: dict[tuple[str, dt.date], str] = {}

    def at(self, module: int, day: dt.date) -> str:
        zone = self.known.zone_on(module, day)
        place = (zone.key, day)
        if place not in self.texts:
            noon = dt.datetime.combine(day, NOON, tzinfo=zone).astimezone(dt.UTC)
            self.texts[place] = utc_text(min(noon, self.known.now.replace(microsecond=0)))
        return self.texts[place]


def made_visit(row: int, code: str, module: int, day: dt.date, known: Any, noons: Noons) -> list[Any]:
    """At noon in the site's zone, since only the day is known."""
    visit_code, code_order = made_code(code, day)
    values = {
        "code": visit_code,
        "code_order": code_order,
        "module_id": module,
        "site_id": noons.known.site_on(module, day),
        "happened_at": noons.at(module, day),
        "happened_on": day,
        "left": "",
        "known_on": known or day,
        "note": "",
    }
    return [row, 0, -row, 0, *map(values.get, VISITS.staged)]


def made_code(module: str, day: dt.date) -> tuple[str, str]:
    """Code and its natural order; the same for the same module and day, so that a repeated import makes the same."""
    start, order = code_start(module)
    stamp = day.isoformat().replace("-", "")
    return start + stamp, order + stamp.rjust(12, "0")


@cache
def code_start(module: str) -> tuple[str, str]:
    start = f"V-{module}-"
    if len(start) > CODE_LENGTH - 11:  # eight digits for the day, and perhaps a number behind
        start = f"V-{hashlib.sha256(module.encode()).hexdigest()[:16].upper()}-"
    return start, natural_key(start)


def settle_taken_codes(first: int) -> None:
    """A code that another visit has already gets a number behind it."""
    index_stage(VISITS, "code")
    taken = (
        "SELECT row, code FROM stage_visits AS made WHERE row >= %s AND (EXISTS (SELECT 1 FROM fleet_visit AS book "
        "WHERE book.code = made.code) OR EXISTS (SELECT 1 FROM stage_visits AS other WHERE other.code = made.code "
        "AND other.row <> made.row))"
    )
    for attempt in range(2, 10):
        rows = fetch(taken, [first])
        if not rows:
            return
        for row, code in rows:
            fresh = f"{code.rpartition('.')[0] if attempt > 2 else code}.{attempt}"
            run("UPDATE stage_visits SET code = %s, code_order = %s WHERE row = %s", [fresh, natural_key(fresh), row])
