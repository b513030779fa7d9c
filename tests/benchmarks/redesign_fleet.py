"""A large fleet that is given a new part, straight into the tables: lives with a known truth, told in day numbers.

Every position is a chain of Weibull lives; sites differ. From a day of its own on each site changes over half of its
modules, one after the other; the new part lives `LONGER` times as long. Every module was read and seen once a month.
"""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass
from typing import Any

import numpy as np

BEGAN = dt.date(2019, 1, 7)
DAYS, ROLLOUT, STAGGERED, PACE = 2000, 1560, 250, 120  # days: of records, first site's start, spread of starts, a site
SCALE, SHAPE, LONGER, SPREAD = 150.0, 2.0, 1.05, 0.3
POSITIONS, LARGE = 4, 50  # of a module; modules of a site in a large fleet
STROKES_A_DAY, MONTH = 300, 30
FAR_DAY = float(dt.date(2199, 12, 31).toordinal())
FIRST = BEGAN.toordinal()
AS_OF = BEGAN + dt.timedelta(days=DAYS)
LIVES_A_POSITION = 17.7


@dataclass(frozen=True, eq=False)
class Fleet:
    """One row a life; days from the first one, -1 where it still runs."""

    position: Any  # which of the fleet's positions
    fitted: Any
    ended: Any
    failed: Any
    new: Any
    mode: Any
    sites: int
    each: int  # modules of a site
    strokes: Any  # a day, of each module

    @property
    def module(self) -> Any:
        return self.position // POSITIONS


def lived(lives: int, seed: int = 11) -> Fleet:
    """A fleet with about so many lives."""
    rng = np.random.default_rng(seed)
    count = max(60, round(lives / LIVES_A_POSITION / POSITIONS))
    each = LARGE if count >= 100 * LARGE else 10
    sites = round(count / each)
    modules = np.arange(sites * each)
    hazard = rng.gamma(1.0 / SPREAD, SPREAD, sites)[modules // each]
    start = ROLLOUT + rng.integers(0, STAGGERED, sites)[modules // each]
    upgrade = np.where(modules % 2 == 0, start + rng.integers(0, PACE, modules.size), 10**6)
    hazard, upgrade = np.repeat(hazard, POSITIONS), np.repeat(upgrade, POSITIONS)
    at, position = rng.integers(0, 60, hazard.size), np.arange(hazard.size)
    columns: list[tuple[Any, ...]] = []
    while position.size:
        new = at >= upgrade[position]
        scale = np.where(new, SCALE * LONGER, SCALE) * hazard[position] ** (-1.0 / SHAPE)
        end = at + np.maximum(1, np.ceil(scale * rng.weibull(SHAPE, position.size)).astype(int))
        changed = ~new & (end >= upgrade[position])
        end = np.where(changed, np.maximum(upgrade[position], at + 1), end)
        running = end >= DAYS
        failed = ~changed & ~running
        mode = np.where(failed, rng.integers(0, 2, position.size), -1)
        columns.append((position, at, np.where(running, -1, end), failed, new, mode))
        at, position = end[~running], position[~running]
    rows = [np.concatenate(column) for column in zip(*columns, strict=True)]
    order = np.lexsort((rows[1], rows[0]))
    strokes = np.round(STROKES_A_DAY * rng.gamma(10.0, 0.1, modules.size))
    return Fleet(*(row[order] for row in rows), sites, each, strokes)


def fill(fleet: Fleet, clock: str = "days", visited: float = 0.0) -> None:
    """Catalogue and sites as records, the rest straight into its tables; a share of sites is known by visits only."""
    from django.db import connection

    from fleet.models import Position, Site
    from tests import factories as make

    component = make.make_component(code="NUT", clock=clock)
    modes = [make.make_mode(code=code, component=component).pk for code in ("WORN", "STRIPPED")]
    kind = make.make_type(code="LIFT")
    places = [Position.objects.create(type=kind, code=f"N{n}", component=component).pk for n in range(1, POSITIONS + 1)]
    old = make.make_part(code="N1", component=component)
    new = make.make_part(code="N2", component=component, supersedes=old)
    sites = [
        make.make_site(code=f"S-{n:04d}", reports_at_once=n >= visited * fleet.sites).pk for n in range(fleet.sites)
    ]
    assert Site.objects.count() == fleet.sites
    days = [(BEGAN + dt.timedelta(days=day)).isoformat() for day in range(DAYS + 1)]
    count = fleet.sites * fleet.each
    site_of = [sites[module // fleet.each] for module in range(count)]
    with connection.cursor() as cursor:
        _without_checks(cursor)
        names = [f"M-{number:06d}" for number in range(1, count + 1)]
        write(cursor, "fleet_module", "id, code, code_order, version, type_id",
              ((n + 1, names[n], names[n], 1, kind.pk) for n in range(count)))  # fmt: skip
        write(cursor, "fleet_placement", "module_id, site_id, bay, from_on, version, struck_out",
              ((n + 1, site_of[n], "", days[0], 1, "") for n in range(count)))  # fmt: skip
        knots = [*range(0, DAYS, MONTH), FAR_DAY - FIRST]
        write(cursor, "fleet_clockpoint", "module_id, day, days, hours, strokes, measured, seen_working, "
              "strokes_read, hours_read",
              ((n + 1, FIRST + day, day, None, day * rate, day < DAYS, day < DAYS, day < DAYS, False)
               for n, rate in enumerate(fleet.strokes.tolist()) for day in knots))  # fmt: skip
        rows = list(zip(*(column.tolist() for column in (
            fleet.module, fleet.position % POSITIONS, fleet.fitted, fleet.ended, fleet.failed, fleet.new, fleet.mode
        )), strict=True))  # fmt: skip
        entered = "2026-01-01 00:00:00+00:00"
        write(cursor, "fleet_fitting",
              "id, code, code_order, version, struck_out, entered_at, module_id, position_id, part_id, serial, lot, "
              "fitted_on, age_at_fit, removed_on, reason, mode_id, found_by, note, removed_known_on",
              ((n, f"F-{n}", f"F-{n:09d}", 1, "", entered, module + 1, places[place], new.pk if is_new else old.pk, "",
                f"L{fitted // 200}", days[fitted], 0.0, days[ended] if ended >= 0 else None,
                ("failed" if failed else "upgrade") if ended >= 0 else "", modes[mode] if mode >= 0 else None, "", "",
                days[min(ended + n % 3, DAYS)] if ended >= 0 else None)
               for n, (module, place, fitted, ended, failed, is_new, mode) in enumerate(rows, 1)))  # fmt: skip
        rates = fleet.strokes.tolist()
        write(cursor, "fleet_fittingclock",
              "fitting_id, module_id, site_id, fitted_day, end_day, last_good_day, last_good_entered, days_at_fit, "
              "days_at_good, days_at_end, strokes_at_fit, strokes_at_good, strokes_at_end, "
              "strokes_measured, hours_measured",
              ((n, module + 1, site_of[module], FIRST + fitted, None if ended < 0 else FIRST + ended,
                FIRST + good if failed else None, False, fitted, good if failed else None, None if ended < 0 else ended,
                rates[module] * fitted, rates[module] * good if failed else None,
                None if ended < 0 else rates[module] * ended, True, False)
               for n, (module, _, fitted, ended, failed, _, _) in enumerate(rows, 1)
               for good in (max(fitted, (ended - 1) // MONTH * MONTH),)))  # fmt: skip
        if connection.vendor == "postgresql":
            cursor.execute("CREATE INDEX again_fitting ON fleet_fitting (part_id, removed_on)")
            cursor.execute("CREATE INDEX again_removed ON fleet_fitting (removed_on)")
            cursor.execute("CREATE INDEX again_place ON fleet_fitting (module_id, position_id, fitted_on)")
            cursor.execute("CREATE INDEX again_clock ON fleet_fittingclock (module_id)")
        cursor.execute("VACUUM ANALYZE" if connection.vendor == "postgresql" else "ANALYZE")


def _without_checks(cursor: Any) -> None:
    """The tables of a throwaway book are filled before their indexes are made: it takes a third of the time."""
    from django.db import connection

    if connection.vendor != "postgresql":
        cursor.execute("PRAGMA foreign_keys = OFF")
        cursor.execute("PRAGMA synchronous = OFF")
        return
    cursor.execute("SET session_replication_role = replica")
    for table in ("fleet_fitting", "fleet_fittingclock"):
        cursor.execute(
            "SELECT conname FROM pg_constraint WHERE conrelid = %s::regclass AND contype IN ('f', 'x', 'u')", [table]
        )
        for (name,) in cursor.fetchall():
            cursor.execute(f'ALTER TABLE {table} DROP CONSTRAINT "{name}"')
        cursor.execute(
            "SELECT i.relname FROM pg_index x JOIN pg_class i ON i.oid = x.indexrelid WHERE x.indrelid = %s::regclass "
            "AND NOT x.indisprimary",
            [table],
        )
        for (name,) in cursor.fetchall():
            cursor.execute(f'DROP INDEX "{name}"')


def write(cursor: Any, table: str, names: str, rows: Any) -> None:
    from django.db import connection

    if connection.vendor == "postgresql":
        with cursor.copy(f"COPY {table} ({names}) FROM STDIN") as copy:
            for row in rows:
                copy.write_row(row)
        return
    places = ", ".join(["%s"] * len(names.split(",")))
    with connection.wrap_database_errors:
        marks = places.replace("%s", "?")
        connection.connection.executemany(f"INSERT INTO {table} ({names}) VALUES ({marks})", rows)
        connection.connection.commit()
