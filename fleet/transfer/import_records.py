"""Records from files into the book: read, check everything, store all or nothing, make the clocks again."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import Any

from django.db import transaction

from fleet.models import DataVersion, Fitting, Person, Work
from fleet.rights import PEOPLE, may
from fleet.transfer.checks import check_overlaps
from fleet.transfer.checks_jobs import check_jobs_keep_their_stays
from fleet.transfer.checks_readings import check_readings, name_counters
from fleet.transfer.columns import FileKind
from fleet.transfer.holding import pause, sweep, sweep_leftovers, without_constraints
from fleet.transfer.job import Job
from fleet.transfer.kinds import ALL_KINDS, BY_NAME, PLACEMENTS
from fleet.transfer.known import Known
from fleet.transfer.lives import check_sets
from fleet.transfer.made_visits import make_visits
from fleet.transfer.matching import compare, find_repeats, match
from fleet.transfer.orders import check_orders, drop_unused
from fleet.transfer.problems import Problems, Unreadable
from fleet.transfer.reading import stage_file
from fleet.transfer.references import check_causes, check_ranks, check_supersession
from fleet.transfer.refresh import refresh
from fleet.transfer.replacements import check_new_parts, check_once_a_component
from fleet.transfer.signature import note_touched_modules, signature
from fleet.transfer.sources import Table
from fleet.transfer.staging import drop_stages, fetch, value_of
from fleet.transfer.stock import check_hours, check_moves, check_received
from fleet.transfer.storing import BookChanged, Store
from fleet.work import Progress

MOST_TRIES = 4
RECORDS_AT_ONCE = 4000  # fittings and readings whose clocks are made in one transaction
BUSY = (
    "The same modules were changed again and again while the files were being stored ({why}). "
    "Nothing was stored. Import them in a quiet hour."
)


@dataclass
class Outcome:
    """What a check found, or what a store did."""

    files: list[dict[str, Any]]
    problems: Problems
    stored: bool = False
    seen: list[Any] = field(default_factory=list)

    def as_dict(self) -> dict[str, Any]:
        return {
            "files": self.files,
            "stored": self.stored,
            "error_count": self.problems.count,
            "errors": self.problems.as_dicts(),
            "plan": [[each["file"], each["added"], each["updated"], each.get("made", 0)] for each in self.files],
        }


class Import:
    """The tables are opened anew for each try, since the book may change meanwhile."""

    def __init__(
        self, open_tables: Callable[[], Sequence[Table]], *, person: Person | None, update: bool, progress: Progress
    ) -> None:
        self.open_tables, self.person, self.update, self.progress = open_tables, person, update, progress

    def preview(self) -> Outcome:
        try:
            return self.check()[1]
        finally:
            drop_stages(ALL_KINDS)

    def store(self, work: Work, plan: list[Any] | None = None) -> Outcome:
        """Checks and stores; with a plan only if it still comes to the same."""
        sweep_before(work)
        why = ""
        for _ in range(MOST_TRIES):
            try:
                job, outcome = self.check()
                if plan is not None and not outcome.problems and outcome.as_dict()["plan"] != plan:
                    outcome.problems.add("", 0, "", "", PLAN_CHANGED)
                if outcome.problems:
                    return outcome
                Store(job, work, outcome.seen, outcome.as_dict()).run()
                outcome.stored = True
                return outcome
            except BookChanged as change:
                why = str(change) or "other entries"
            finally:
                drop_stages(ALL_KINDS)
        outcome = Outcome([], Problems())
        outcome.problems.add("", 0, "", "", BUSY.format(why=why))
        return outcome

    def check(self) -> tuple[Job, Outcome]:
        drop_stages(ALL_KINDS)
        problems = Problems()
        job = Job(Known(), problems, self.progress, self.person, self.update)
        try:
            tables = sorted_tables(list(self.open_tables()), job)
        except Unreadable as fault:
            problems.add(fault.file, fault.row, "", "", fault.message)
            return job, Outcome([], problems)
        for kind, table in tables:
            take_in(kind, table, job)
        note_touched_modules(job.kinds)
        seen = signature()
        check_together(job)
        if not problems and any(kind.name == "fittings" for kind in job.kinds):
            make_visits(job)
        count_rows(job)
        return job, Outcome([job.reports[kind.name].as_dict() for kind in job.kinds], problems, seen=seen)


PLAN_CHANGED = "The book was changed since the preview, and the files now come to something else. Preview them again."
NEEDS_MANAGER = "brings in people, which only a manager may do. Ask one, or leave this file out."


def sorted_tables(tables: list[Table], job: Job) -> list[tuple[FileKind, Table]]:
    """In the order in which files refer to each other; what is no records file is an error."""
    chosen: dict[str, Table] = {}
    for table in tables:
        if table.name not in BY_NAME:
            known = ", ".join(kind.name for kind in ALL_KINDS)
            job.problems.add(table.file, 0, "", "", f"is no records file. Name it as one of: {known}; or leave it out.")
        elif table.name == "people" and job.person is not None and not may(job.person, PEOPLE):
            job.problems.add(table.file, 0, "", "", NEEDS_MANAGER)
        else:
            chosen[table.name] = table
    return [(kind, chosen[kind.name]) for kind in ALL_KINDS if kind.name in chosen]


def take_in(kind: FileKind, table: Table, job: Job) -> None:
    """Reads one file, and makes it known to those after it."""
    if ALL_KINDS.index(kind) > ALL_KINDS.index(PLACEMENTS) and not job.known.stays_loaded:
        job.known.load_stays([], set())
    stage_file(kind, table, job)
    find_repeats(kind, job)
    if kind.name == "readings":
        name_counters(kind)
    match(kind, job)
    refresh(kind, job.known)


def check_together(job: Job) -> None:
    """What rows say about each other, and against the book."""
    for kind in job.kinds:
        job.step(0, f"Checking {kind.file}")
        if kind.name == "people":
            check_ranks(kind, job)
        elif kind.name == "parts":
            check_supersession(kind, job)
        elif kind.name == "redesigns":
            check_new_parts(kind, job)
        elif kind.name == "replacements":
            check_once_a_component(kind, job)
        elif kind.name == "placements":
            check_overlaps(kind, ["module_id"], "from_on", "to_on", "another stay of this module", job)
            check_jobs_keep_their_stays(kind, job)
        elif kind.name == "fittings":
            check_causes(kind, job)
            same = ["module_id", "position_id"]
            check_overlaps(kind, same, "fitted_on", "removed_on", "another part in this position", job)
        elif kind.name == "stops":
            check_overlaps(kind, ["module_id"], "stopped_at", "running_at", "another stop of this module", job)
        elif kind.name == "readings":
            check_readings(kind, job)
        elif kind.name == "supply":
            check_orders(kind, job)
            drop_unused(job)
            if not any(other.name == "moves" for other in job.kinds):
                check_received(job)
        elif kind.name == "bench":
            check_overlaps(kind, ["module_id"], "received_on", "finished_on", "another job of this module", job)
        elif kind.name == "hours":
            check_hours(kind, job)
        elif kind.name == "moves":
            check_moves(kind, job)
        elif kind.name == "lives":
            check_sets(kind, job)
        compare(kind, job)


def count_rows(job: Job) -> None:
    for kind in job.kinds:
        report = job.reports[kind.name]
        report.added = value_of(f"SELECT COUNT(*) FROM {kind.stage} WHERE id < 0 AND bad = 0") - report.made
        report.updated = value_of(f"SELECT COUNT(*) FROM {kind.stage} WHERE id > 0 AND differs = 1")
        report.passed_over = value_of(f"SELECT COUNT(*) FROM {kind.stage} WHERE id > 0 AND differs = 0")


def sweep_before(work: Work) -> None:
    """What an earlier attempt of this work, or a given-up import, left waiting."""
    if work.result.get("holding"):
        without_constraints(lambda: sweep(work.result["holding"]))
    sweep_leftovers()


def make_clocks_again(modules: list[int], progress: Progress) -> None:
    """In short transactions; may be repeated. The data version rises once more, since estimates read the clocks."""
    from fleet.actions.rebuild_clocks import rebuild_clocks

    for done, chunk in chunks_of_modules(modules):
        rebuild_clocks(chunk)
        progress.step(done, len(modules), "Making the clocks again", may_stop=False)
        pause()
    with transaction.atomic():
        DataVersion.raise_version()


def chunks_of_modules(modules: list[int]) -> list[tuple[int, list[int]]]:
    """Few modules with long histories, or many with short ones."""
    weights: dict[int, int] = {}
    for start in range(0, len(modules), 500):
        some = modules[start : start + 500]
        marks = ", ".join(["%s"] * len(some))
        for table in (Fitting._meta.db_table, "fleet_reading"):
            for module, count in fetch(
                f"SELECT module_id, COUNT(*) FROM {table} WHERE module_id IN ({marks}) GROUP BY module_id", some
            ):
                weights[module] = weights.get(module, 0) + count
    chunks: list[tuple[int, list[int]]] = []
    chunk: list[int] = []
    weight = 0
    for place, module in enumerate(modules, start=1):
        chunk.append(module)
        weight += 5 + weights.get(module, 0)
        if weight >= RECORDS_AT_ONCE or place == len(modules):
            chunks.append((place, chunk))
            chunk, weight = [], 0
    return chunks
