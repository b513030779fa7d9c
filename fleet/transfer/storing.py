"""Moves checked rows from the staging tables into the book: all of them, or none."""

from __future__ import annotations

from typing import Any

from django.db import IntegrityError, transaction
from django.utils import timezone

from fleet.models import DataVersion, LifeSet, Work
from fleet.models.codes import natural_key
from fleet.transfer.columns import FileKind
from fleet.transfer.holding import hold_rows, let_stand, sweep, waits, without_constraints, write_history
from fleet.transfer.job import Job
from fleet.transfer.link_rows import write_links
from fleet.transfer.orders import ORDERS, write_orders
from fleet.transfer.replacements import raise_changed
from fleet.transfer.reserve import reserve
from fleet.transfer.signature import hold_still, signature
from fleet.transfer.staging import fetch, on_sqlite, run, value_of
from fleet.transfer.stock import write_balances
from fleet.transfer.writing_sql import (
    LIFE_SETS,
    Numbers,
    history_statement,
    insert_statement,
    keeps_history,
    update_statement,
)
from fleet.work.fence import write_fenced


class BookChanged(Exception):
    """Somebody changed what the check stood on; it has to be made again."""


class Store:
    """One attempt to store one checked job."""

    def __init__(self, job: Job, work: Work, seen: list[Any], report: dict[str, Any]) -> None:
        self.job, self.work, self.seen, self.report = job, work, seen, report
        self.numbers = Numbers(now=timezone.now(), person=job.person, work_id=work.pk)
        self.last_rows = {kind.name: int(last_new_row(kind)) for kind in job.kinds}
        self.ranges: dict[str, list[int]] = {}
        self.touched: list[int] = []

    def run(self) -> None:
        """Raises BookChanged with nothing stored."""
        self.reserve_numbers()
        try:
            without_constraints(self.store)
        except IntegrityError as fault:
            self.sweep()
            raise BookChanged(str(fault)) from fault
        except BaseException:
            self.sweep()
            raise

    def reserve_numbers(self) -> None:
        for kind in self.job.kinds:
            if self.last_rows[kind.name]:
                self.numbers.base[kind.table] = reserve(kind.table, self.last_rows[kind.name])
        new_orders = self.job.known.new_orders
        if new_orders:
            most = -min(order.id for order in new_orders.values())
            self.numbers.base[ORDERS] = reserve(ORDERS, most)
        new_sets = self.job.known.new_life_sets
        if new_sets:
            self.numbers.base[LIFE_SETS] = reserve(LIFE_SETS, len(new_sets))

    def store(self) -> None:
        held = [kind for kind in self.job.kinds if waits(kind) and self.last_rows[kind.name]]
        if held:
            self.ranges = {
                kind.table: [base := self.numbers.base[kind.table], base + self.last_rows[kind.name]] for kind in held
            }
            self.job.progress.keep({"holding": self.ranges})
            self.job.rows_total += sum(self.last_rows[kind.name] for kind in held)
            for kind in held:
                hold_rows(kind, self.last_rows[kind.name], self.numbers, self.hold, self.job.step)
        self.job.progress.step(self.job.rows_done, self.job.rows_total, "Storing")
        self.touched = self.touched_modules()
        with transaction.atomic():
            self.last_transaction(held)

    def hold(self) -> None:
        """Inside each transaction: an attempt that was taken over stores nothing more."""
        write_fenced(self.work.pk, self.work.attempt)

    def last_transaction(self, held: list[FileKind]) -> None:
        """What takes long comes before the last look at the book, so that others are held up for a moment only."""
        updated = [kind for kind in self.job.kinds if has_differing(kind)]
        if updated:  # close before you open
            self.look_again()
            for kind in updated:
                self.write_update(kind)
        self.add_life_sets()
        write_orders(self.job, self.numbers)
        for kind in self.job.kinds:
            if kind not in held and self.last_rows[kind.name]:
                self.add_rows(kind)
        check_references()
        if not updated:
            self.look_again()
        for kind in held:
            let_stand(kind, self.last_rows[kind.name], self.numbers)
        for kind in self.job.kinds:
            if "linked" in kind.extra:
                write_links(kind, self.job.known, self.numbers)
            if kind.name == "replacements":
                raise_changed(kind)
            if kind.name == "moves":
                write_balances(kind, self.last_rows[kind.name], self.numbers)
        DataVersion.raise_version()
        # A worker that dies from here on leaves nothing to do but the clocks.
        self.job.progress.keep(self.report | {"stored": True, "touched": self.touched})

    def look_again(self) -> None:
        """From here to the commit nobody changes what the check stood on; whoever did so before is found out."""
        hold_still()
        self.hold()
        own = {
            kind.table: (base := self.numbers.base[kind.table], base + self.last_rows[kind.name])
            for kind in self.job.kinds
            if self.last_rows[kind.name]
        }
        if signature(own | self.new_life_sets() | self.new_orders()) != self.seen:
            raise BookChanged

    def new_life_sets(self) -> dict[str, tuple[int, int]]:
        base = self.numbers.base.get(LIFE_SETS, 0)
        return {LIFE_SETS: (base, base + len(self.job.known.new_life_sets))}

    def new_orders(self) -> dict[str, tuple[int, int]]:
        base = self.numbers.base.get(ORDERS, 0)
        return {ORDERS: (base, base - min((each.id for each in self.job.known.new_orders.values()), default=0))}

    def add_rows(self, kind: FileKind) -> None:
        statement, params = insert_statement(kind, self.numbers, waiting=False)
        run(statement, [*params, 0, self.last_rows[kind.name]])
        base = self.numbers.base[kind.table]
        write_history(kind, self.numbers, base, base + self.last_rows[kind.name])

    def write_update(self, kind: FileKind) -> None:
        run(*update_statement(kind, self.numbers))
        if keeps_history(kind):
            where = f"id IN (SELECT id FROM {kind.stage} WHERE differs = 1)"
            run(*history_statement(kind, self.numbers, "~", where))

    def add_life_sets(self) -> None:
        base = self.numbers.base.get(LIFE_SETS, 0)
        for code, number in self.job.known.new_life_sets.items():
            LifeSet.objects.create(
                pk=base - number, code=code, code_order=natural_key(code), entered_by=self.job.person
            )

    def sweep(self) -> None:
        if self.ranges:
            without_constraints(lambda: sweep(self.ranges))

    def touched_modules(self) -> list[int]:
        """Final numbers of all modules whose clocks have to be made again."""
        found: set[int] = set()
        base = self.numbers.base.get("fleet_module", 0)
        for kind in self.job.kinds:
            changed = f"FROM {kind.stage} WHERE id < 0 OR differs = 1"
            if kind.name in {"placements", "visits", "fittings", "stops", "readings"}:  # a job alone moves no clock
                found |= {each for (each,) in fetch(f"SELECT DISTINCT module_id {changed}")}
            elif kind.name == "modules":
                found |= {each for (each,) in fetch(f"SELECT id {changed}")}
            elif kind.name == "sites":
                found |= {
                    each
                    for (each,) in fetch(
                        "SELECT DISTINCT module_id FROM fleet_placement WHERE site_id IN "
                        f"(SELECT id FROM {kind.stage} WHERE differs = 1 AND id > 0)"
                    )
                }
        return sorted(each if each > 0 else base - each for each in found)


def check_references() -> None:
    """PostgreSQL would look them up at the commit, while everybody waits for the data version: do it before."""
    if not on_sqlite():
        run("SET CONSTRAINTS ALL IMMEDIATE")
        run("SET CONSTRAINTS ALL DEFERRED")


def last_new_row(kind: FileKind) -> int:
    return value_of(f"SELECT COALESCE(MAX(row), 0) FROM {kind.stage} WHERE id < 0")


def has_differing(kind: FileKind) -> bool:
    return bool(fetch(f"SELECT 1 FROM {kind.stage} WHERE differs = 1 LIMIT 1"))
