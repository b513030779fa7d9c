"""What must hold of the records, checked on raw rows: it shares no code with the actions.

`broken_rules()` lists every breach in words; an empty list means that the book is sound.
"""

from __future__ import annotations

import datetime as dt
from collections import defaultdict
from collections.abc import Iterator
from itertools import pairwise
from typing import Any

from django.db import connection

from fleet.models import (
    ClockPoint,
    Finding,
    Fitting,
    FittingClock,
    Module,
    Placement,
    Reading,
    Stop,
    Visit,
)

Row = dict[str, Any]
FAILED = {"failed", "worn to limit"}
REASONS = {*FAILED, "planned", "taken with another", "upgrade", "module withdrawn", "not known"}


def broken_rules() -> list[str]:
    return [breach for rule in RULES for breach in rule()]


def rows_of(model: Any) -> list[Row]:
    """Straight from the table, past managers and properties."""
    with connection.cursor() as cursor:
        cursor.execute(f'SELECT * FROM "{model._meta.db_table}" ORDER BY "{model._meta.pk.column}"')
        names = [column[0] for column in cursor.description]
        return [dict(zip(names, values, strict=True)) for values in cursor.fetchall()]


def standing(model: Any) -> list[Row]:
    return [row for row in rows_of(model) if row["struck_out"] == ""]


def day(value: Any) -> dt.date | None:
    """SQLite's raw rows hold days as text."""
    if value is None or (isinstance(value, dt.date) and not isinstance(value, dt.datetime)):
        return value
    return dt.date.fromisoformat(str(value)[:10])


def instant(value: Any) -> dt.datetime | None:
    if value is None:
        return None
    read = value if isinstance(value, dt.datetime) else dt.datetime.fromisoformat(str(value))
    return read.replace(tzinfo=dt.UTC) if read.tzinfo is None else read.astimezone(dt.UTC)


def grouped(rows: list[Row], *names: str) -> Iterator[tuple[Any, list[Row]]]:
    groups: dict[Any, list[Row]] = defaultdict(list)
    for row in rows:
        groups[tuple(row[name] for name in names)].append(row)
    yield from groups.items()


def collide(stays: list[tuple[Any, Any, Any]]) -> Iterator[tuple[Any, Any]]:
    """Pairs (key, key) of stays [start, end) that share an inside; a stay of no length may touch but not lie within."""
    for index, (key, start, end) in enumerate(stays):
        for other, other_start, other_end in stays[index + 1 :]:
            if start < other_end and other_start < end:
                yield key, other


def positions_hold_one_part() -> Iterator[str]:
    for (module, position), rows in grouped(standing(Fitting), "module_id", "position_id"):
        stays = [(r["id"], day(r["fitted_on"]) or dt.date.min, day(r["removed_on"]) or dt.date.max) for r in rows]
        for one, other in collide(stays):
            yield f"fittings {one} and {other} share position {position} of module {module}"
        running = [row["id"] for row in rows if row["removed_on"] is None]
        if len(running) > 1:
            yield f"fittings {running} all run in position {position} of module {module}"


def modules_stand_in_one_place() -> Iterator[str]:
    for (module,), rows in grouped(standing(Placement), "module_id"):
        stays = [(row["id"], day(row["from_on"]), day(row["to_on"]) or dt.date.max) for row in rows]
        for _, start, end in stays:
            if end < start:
                yield f"a stay of module {module} ends before it begins"
        for one, other in collide(stays):
            yield f"placements {one} and {other} of module {module} overlap"


def stops_do_not_overlap() -> Iterator[str]:
    latest = dt.datetime.max.replace(tzinfo=dt.UTC)
    for (module,), rows in grouped(standing(Stop), "module_id"):
        stays = [(row["id"], instant(row["stopped_at"]), instant(row["running_at"]) or latest) for row in rows]
        for key, start, end in stays:
            if end < start:
                yield f"stop {key} ends before it begins"
        for one, other in collide(stays):
            yield f"stops {one} and {other} of module {module} overlap"


def fittings_are_in_order() -> Iterator[str]:
    for row in standing(Fitting):
        fitted, failed, removed = day(row["fitted_on"]), day(row["failed_on"]), day(row["removed_on"])
        good, name = day(row["last_good_on"]), f"fitting {row['id']}"
        if (removed is None) != (row["reason"] == ""):
            yield f"{name} has a reason without a removal, or the other way round"
        if row["reason"] and row["reason"] not in REASONS:
            yield f"{name} has the unknown reason {row['reason']}"
        if removed is None and any(row[c] is not None for c in ("mode_id", "failed_on", "caused_by_id")):
            yield f"{name} still runs, yet says how it ended"
        days = [each for each in (fitted, good, failed, removed) if each is not None]
        if days != sorted(days):
            yield f"{name}: fitted {fitted}, good {good}, failed {failed}, removed {removed} are out of order"
        if (failed or good) and row["reason"] not in FAILED:
            yield f"{name} has a day of failure, yet was removed as {row['reason']}"
        for unit in ("strokes", "hours"):
            begun, ended = row[f"{unit}_at_fit"], row[f"{unit}_at_removal"]
            if begun is not None and ended is not None and ended < begun:
                yield f"{name}: {unit} fell from {begun} to {ended}"


def fittings_belong_together() -> Iterator[str]:
    for fitting in Fitting.objects.standing().select_related("module", "position", "part", "mode", "caused_by"):
        if fitting.position.type_id != fitting.module.type_id:
            yield f"fitting {fitting.pk} sits in another type's position"
        if fitting.part.component_id != fitting.position.component_id:
            yield f"fitting {fitting.pk} is of the wrong component"
        if fitting.mode is not None and fitting.mode.component_id != fitting.position.component_id:
            yield f"fitting {fitting.pk} has another component's mode"
        cause = fitting.caused_by
        if cause is not None and (cause.struck_out or cause.module_id != fitting.module_id or cause.pk == fitting.pk):
            yield f"fitting {fitting.pk} names a cause that is struck out, elsewhere or itself"
    for finding in Finding.objects.standing().select_related("visit__module", "position", "mode"):
        if finding.position.type_id != finding.visit.module.type_id:
            yield f"finding {finding.pk} is at another type's position"
        if finding.mode is not None and finding.mode.component_id != finding.position.component_id:
            yield f"finding {finding.pk} has another component's mode"


def records_hang_on_standing_visits() -> Iterator[str]:
    visits = {row["id"]: row for row in rows_of(Visit)}
    for model, columns in (
        (Fitting, ("fitted_visit_id", "removed_visit_id")),
        (Reading, ("visit_id",)),
        (Stop, ("visit_id",)),
        (Finding, ("visit_id",)),
    ):
        for row in standing(model):
            for column in columns:
                visit = visits.get(row[column])
                if visit is None:
                    continue
                name = f"{model.__name__.lower()} {row['id']}"
                if visit["struck_out"]:
                    yield f"{name} hangs on the struck-out visit {visit['id']}"
                if "module_id" in row and row["module_id"] != visit["module_id"]:
                    yield f"{name} hangs on a visit to another module"
    for row in standing(Fitting):
        for end in ("fitted", "removed"):
            visit = visits.get(row[f"{end}_visit_id"])
            if visit is not None and day(visit["happened_on"]) != day(row[f"{end}_on"]):
                yield f"fitting {row['id']}: {end} on another day than its visit"


def faces_never_fall() -> Iterator[str]:
    """Within one counter, whatever was struck out or entered late between."""
    for (module,), rows in grouped(standing(Reading), "module_id"):
        for unit in ("strokes", "hours"):
            counter, last = "", None
            for row in as_read([row for row in rows if row[unit] is not None]):
                fresh = bool(row["restarts"]) or row["counter"] not in {"", counter}
                if last is not None and not fresh and row[unit] < last:
                    yield f"reading {row['id']} of module {module}: {unit} fell from {last} to {row[unit]}"
                last, counter = row[unit], row["counter"] or counter


def as_read(rows: list[Row]) -> Iterator[Row]:
    """Of readings at one moment those of the counter that was running come before those of the next one."""
    counter = ""
    for _, together in sorted(grouped([{**row, "moment": instant(row["read_at"])} for row in rows], "moment")):
        running = counter
        for row in sorted(together, key=lambda row, now=running: (row["counter"] not in {"", now}, row["id"])):
            counter = row["counter"] or counter
            yield row


def accumulated_never_falls() -> Iterator[str]:
    for (module,), rows in grouped(rows_of(ClockPoint), "module_id"):
        rows.sort(key=lambda row: row["day"])
        for unit in ("days", "hours", "strokes"):
            totals = [row[unit] for row in rows if row[unit] is not None]
            if any(later < earlier - 1e-6 for earlier, later in pairwise(totals)):
                yield f"the clock of module {module} in {unit} falls: {totals}"


def every_standing_fitting_has_a_clock() -> Iterator[str]:
    wanted = {row["id"] for row in standing(Fitting)}
    present = {row["fitting_id"] for row in rows_of(FittingClock)}
    if wanted != present:
        yield f"fittings without a clock: {wanted - present}; clocks without a fitting: {present - wanted}"


def nothing_lies_in_the_future() -> Iterator[str]:
    today = dt.datetime.now(dt.UTC).date() + dt.timedelta(days=1)
    columns = {
        Fitting: ("fitted_on", "failed_on", "removed_on", "fitted_known_on", "removed_known_on"),
        Placement: ("from_on", "to_on"),
        Visit: ("happened_on", "known_on"),
        Stop: ("stopped_at", "running_at", "known_on"),
        Reading: ("read_at", "known_on"),
    }
    for model, names in columns.items():
        for row in standing(model):
            for name in names:
                when = day(row[name])
                if when is not None and when > today:
                    yield f"{model.__name__.lower()} {row['id']}: {name} {when} lies in the future"


def nothing_was_known_before_it_happened() -> Iterator[str]:
    pairs = {
        Fitting: (("fitted_on", "fitted_known_on"), ("removed_on", "removed_known_on")),
        Visit: (("happened_on", "known_on"),),
    }
    for model, columns in pairs.items():
        for row in standing(model):
            for happened, known in columns:
                if (
                    row[happened]
                    and row[known]
                    and (day(row[known]) or dt.date.max) < (day(row[happened]) or dt.date.min)
                ):
                    yield f"{model.__name__.lower()} {row['id']} was known before it happened"


def scrapped_modules_rest() -> Iterator[str]:
    scrapped = {row["id"]: day(row["scrapped_on"]) for row in rows_of(Module) if row["scrapped_on"]}
    for row in standing(Visit):
        end = scrapped.get(row["module_id"])
        if end is not None and (day(row["happened_on"]) or dt.date.min) > end:
            yield f"visit {row['id']} after its module was scrapped"


def nothing_changes_silently() -> Iterator[str]:
    """The newest row of the history equals the record, derived columns apart; versions count up one by one."""
    for model in (Visit, Fitting, Stop, Finding, Placement):
        newest: dict[int, Row] = {}
        versions: dict[int, list[int]] = defaultdict(list)
        for row in rows_of(model.history.model):
            newest[row["id"]] = row
            versions[row["id"]].append(row["version"])
        for row in rows_of(model):
            kept = newest.get(row["id"])
            if kept is None:
                yield f"{model.__name__.lower()} {row['id']} has no history"
                continue
            differing = [name for name in row if name != "site_id" and kept[name] != row[name]]
            if differing:
                yield f"{model.__name__.lower()} {row['id']} changed without history: {differing}"
            if versions[row["id"]] != list(range(1, row["version"] + 1)):
                yield f"{model.__name__.lower()} {row['id']}: versions {versions[row['id']]}"


RULES = [
    positions_hold_one_part,
    modules_stand_in_one_place,
    stops_do_not_overlap,
    fittings_are_in_order,
    fittings_belong_together,
    records_hang_on_standing_visits,
    faces_never_fall,
    accumulated_never_falls,
    every_standing_fitting_has_a_clock,
    nothing_lies_in_the_future,
    nothing_was_known_before_it_happened,
    scrapped_modules_rest,
    nothing_changes_silently,
]
