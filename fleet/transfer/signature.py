"""Whether somebody changed, since the files were checked, what the check stood on."""

from __future__ import annotations

from typing import Any

from django.db import connection

from fleet.models import (
    BenchCapacity,
    BenchHours,
    BenchJob,
    Component,
    FailureMode,
    Fitting,
    LifeSet,
    Module,
    ModuleType,
    Part,
    Person,
    Placement,
    Position,
    Reading,
    Redesign,
    RedesignChange,
    RolloutStep,
    Site,
    Stop,
    Store,
    SupplyLine,
    SupplyOrder,
    Visit,
)
from fleet.transfer.columns import FileKind
from fleet.transfer.staging import fetch, on_sqlite, run
from fleet.transfer.stock import hold_stock_still, note_touched_stock, stock_signature

CATALOGUE = [Person, Site, Component, FailureMode, ModuleType, Position, Part, Module, Store]
REDESIGNS = [Redesign, RolloutStep]
SUPPLY = [SupplyOrder, SupplyLine, BenchCapacity, BenchHours]
OF_MODULES = [Placement, Visit, Fitting, Stop, BenchJob]
OWN = {"placements", "visits", "fittings", "stops", "readings", "bench"}
Ranges = dict[str, tuple[int, int]]


def note_touched_modules(kinds: list[FileKind]) -> None:
    """The modules of the book whose records the files add to or change."""
    run("DROP TABLE IF EXISTS touched_modules")
    run("CREATE TEMPORARY TABLE touched_modules (id bigint PRIMARY KEY)")
    for kind in kinds:
        if kind.name in OWN:
            run(
                f"INSERT INTO touched_modules SELECT DISTINCT module_id FROM {kind.stage} "
                "WHERE module_id > 0 AND module_id NOT IN (SELECT id FROM touched_modules)"
            )
    note_touched_stock(kinds)


def signature(own: Ranges | None = None) -> list[Any]:
    """Counts and versions of the catalogue and of the touched modules' records, without rows of this import."""
    own = own or {}
    parts: list[Any] = []
    for model in [*CATALOGUE, *REDESIGNS, *SUPPLY]:
        parts += of_others(model._meta.db_table, "COALESCE(SUM(version), 0)", own)
    parts += of_others(RedesignChange._meta.db_table, "COALESCE(SUM(new_part_id), 0)", own)
    parts += of_others(LifeSet._meta.db_table, "0", own)
    touched = "module_id IN (SELECT id FROM touched_modules)"
    for model in OF_MODULES:
        parts += of_others(model._meta.db_table, "COALESCE(SUM(version), 0)", own, touched)
    parts += of_others(Reading._meta.db_table, "COUNT(NULLIF(struck_out, ''))", own, touched)
    parts += stock_signature()
    return [[int(each) for each in row] for row in parts]


def of_others(table: str, measure: str, own: Ranges, which: str = "1 = 1") -> list[Any]:
    low, high = own.get(table, (0, 0))
    return fetch(f"SELECT COUNT(*), {measure} FROM {table} WHERE {which} AND NOT (id > %s AND id <= %s)", [low, high])


def hold_still() -> None:
    """On PostgreSQL nobody changes the catalogue or these modules until the commit; SQLite has one writer anyway."""
    if on_sqlite():
        return
    tables = ", ".join(connection.ops.quote_name(model._meta.db_table) for model in [*CATALOGUE, *REDESIGNS, *SUPPLY])
    run(f"LOCK TABLE {tables} IN SHARE ROW EXCLUSIVE MODE")
    run("SELECT id FROM fleet_module WHERE id IN (SELECT id FROM touched_modules) ORDER BY id FOR NO KEY UPDATE")
    hold_stock_still()
