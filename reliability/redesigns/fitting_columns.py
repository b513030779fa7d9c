"""The fittings of some parts as columns of numbers: what the rules for a life need of a million of them at once.

Reading row by row into Python takes ten times as long as the database takes to find them. PostgreSQL therefore sends
each column as one array, several small numbers packed into one; SQLite sends the same packed numbers row by row.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, NamedTuple

from django.db import connection

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

    Numbers = NDArray[np.int64]
    Floats = NDArray[np.float64]
    Flags = NDArray[np.bool_]

# numbers of records fit into 31 bits; a larger one overflows in the database, which is an error and no wrong number
HIGH = 2**32
DAY_BITS, LAG_BITS = 22, 19
REASONS = ("failed", "", "worn to limit", "not known", "otherwise")  # the most frequent first
REASON_BITS = 7
REMOVED_LATER, ENTERED, HAS_AGE, HAS_RECORDS, HAS_GOOD = (1 << bit for bit in range(3, 8))


@dataclass(frozen=True, eq=False)
class FittingColumns:
    """One row a fitting that was in by the as-of day; 0 where a number is empty, NaN where a count is.

    reason: index into REASONS; site: where it ended, or stands now. lag: days from the removal's failure until it was
    known. at_…: the count of the clock asked for; at_good is read only where a rule may need it.
    """

    module: Numbers
    position: Numbers
    part: Numbers
    mode: Numbers
    reason: Numbers
    site: Numbers
    fitted_day: Numbers
    end_day: Numbers
    records_day: Numbers
    lag: Numbers
    removed_later: Flags
    entered: Flags
    age_at_fit: Floats
    at_fit: Floats
    at_records: Floats
    at_good: Floats
    at_end: Floats

    def __len__(self) -> int:
        return int(self.module.size)

    def chosen(self, rows: Any) -> FittingColumns:
        return FittingColumns(**{name: column[rows] for name, column in self.__dict__.items()})


def read_fittings(
    parts: Sequence[int], clock: str, as_of: int, as_of_text: str, late_sites: Iterable[int]
) -> FittingColumns:
    """All standing fittings of these parts up to the day. late_sites: those that may not report a failure at once."""
    import numpy as np

    wanted = _wanted(clock, as_of, as_of_text, late_sites)
    where = f"""FROM fleet_fitting f JOIN fleet_fittingclock c ON c.fitting_id = f.id
        LEFT JOIN fleet_visit v ON v.id = f.removed_visit_id
        WHERE f.part_id IN ({", ".join(str(int(part)) for part in parts) or "-1"}) AND f.struck_out = ''
            AND (c.fitted_day IS NULL OR c.fitted_day <= {int(as_of)})"""
    read = _as_arrays if connection.vendor == "postgresql" else _as_rows
    places, designs, place, days, at_fit, at_end, rest = read(wanted, where)
    flags = place % HIGH
    known = days >> LAG_BITS
    dense = {}
    for name, (flag, _) in wanted.sparse.items():
        column = np.full(flags.size, 0.0 if name in ("records_day", "age_at_fit") else np.nan)
        column[(flags & flag) != 0] = rest[name]
        dense[name] = column
    records_day = dense.pop("records_day").astype(np.int64)
    return FittingColumns(
        module=places // HIGH,
        position=places % HIGH,
        part=designs // HIGH,
        mode=designs % HIGH,
        reason=flags & REASON_BITS,
        site=place // HIGH,
        fitted_day=known >> DAY_BITS,
        end_day=known & ((1 << DAY_BITS) - 1),
        records_day=records_day,
        lag=days & ((1 << LAG_BITS) - 1),
        removed_later=(flags & REMOVED_LATER) != 0,
        entered=(flags & ENTERED) != 0,
        at_fit=at_fit,
        at_end=at_end,
        **dense,
    )


class _Wanted(NamedTuple):
    """SQL of packed whole numbers, of numbers as they are, of the conditions behind the flags, and of the columns that
    few rows fill with the flag of these rows."""

    packed: dict[str, str]
    floats: dict[str, str]
    conditions: dict[int, str]
    sparse: dict[str, tuple[int, str]]


def _wanted(clock: str, as_of: int, as_of_text: str, late_sites: Iterable[int]) -> _Wanted:
    late = ", ".join(str(int(site)) for site in late_sites) or "-1"
    conditions = {
        REMOVED_LATER: f"f.removed_on > '{as_of_text}'",
        ENTERED: "c.last_good_entered",
        HAS_AGE: "f.age_at_fit <> 0",
        HAS_RECORDS: "c.records_day IS NOT NULL",
        # elsewhere the day on which it was last seen in order plays no part
        HAS_GOOD: f"c.last_good_entered OR c.end_day > {int(as_of)} OR COALESCE(c.site_id, -1) IN (-1, {late})",
    }
    numbered = " ".join(f"WHEN '{name}' THEN {number}" for number, name in enumerate(REASONS[:-1]))
    flags = " + ".join(f"CASE WHEN {text} THEN {flag} ELSE 0 END" for flag, text in conditions.items())
    packed = {
        "places": f"f.module_id * {HIGH} + f.position_id",
        "designs": f"f.part_id * {HIGH} + COALESCE(f.mode_id, 0)",
        "site": f"COALESCE(c.site_id, 0) * {HIGH} + CASE f.reason {numbered} ELSE {len(REASONS) - 1} END + {flags}",
        "days": f"COALESCE(c.fitted_day, 0) * {1 << (DAY_BITS + LAG_BITS)} "
        f"+ CAST(COALESCE(c.end_day, 0) AS bigint) * {1 << LAG_BITS} + COALESCE({_lag()}, 0)",
    }
    sparse = {
        "age_at_fit": (HAS_AGE, "f.age_at_fit"),
        "records_day": (HAS_RECORDS, "CAST(c.records_day AS double precision)"),
        "at_records": (HAS_RECORDS, f"c.{clock}_at_records"),
        "at_good": (HAS_GOOD, f"c.{clock}_at_good"),
    }
    floats = {"at_fit": f"c.{clock}_at_fit", "at_end": f"c.{clock}_at_end"}
    return _Wanted(packed, floats, conditions, sparse)


def _lag() -> str:
    """Days from the failure until somebody knew of it, never below 0."""
    known, happened = "COALESCE(f.removed_known_on, v.known_on, f.removed_on)", "COALESCE(f.failed_on, f.removed_on)"
    if connection.vendor == "postgresql":
        return f"LEAST(GREATEST({known} - {happened}, 0), {(1 << LAG_BITS) - 1})"
    days = f"CAST(ROUND(JULIANDAY({known}) - JULIANDAY({happened})) AS INTEGER)"
    return f"MIN(MAX({days}, 0), {(1 << LAG_BITS) - 1})"


def _as_arrays(wanted: _Wanted, where: str) -> list[Any]:
    """Each column as the bytes of one array: neither side touches single rows."""
    from psycopg import Cursor

    chosen = [f"array_send(array_agg({text}))" for text in wanted.packed.values()]
    chosen += [f"array_send(array_agg(COALESCE({text}, 'NaN')))" for text in wanted.floats.values()]
    for flag, text in wanted.sparse.values():
        chosen.append(f"array_send(array_agg(COALESCE({text}, 'NaN')) FILTER (WHERE {wanted.conditions[flag]}))")
    connection.ensure_connection()
    with Cursor(connection.connection) as cursor:  # Django's own cannot ask for bytes as they are
        (found,) = cursor.execute(f"SELECT {', '.join(chosen)} {where}", binary=True).fetchall()
    columns = [_unpacked(sent, whole=place < len(wanted.packed)) for place, sent in enumerate(found)]
    dense = len(wanted.packed) + len(wanted.floats)
    return [*columns[:dense], dict(zip(wanted.sparse, columns[dense:], strict=True))]


def _unpacked(sent: bytes | None, *, whole: bool) -> Any:
    """PostgreSQL's array_send: 20 bytes of heading, then each value behind its length, high bytes first."""
    import numpy as np

    if sent is None:
        return np.zeros(0, dtype=np.int64 if whole else np.float64)
    values = np.frombuffer(sent, dtype=[("length", ">i4"), ("value", ">i8" if whole else ">f8")], offset=20)["value"]
    return values.astype(np.int64 if whole else np.float64)


def _as_rows(wanted: _Wanted, where: str) -> list[Any]:
    import numpy as np

    sparse = [f"CASE WHEN {wanted.conditions[flag]} THEN {text} END" for flag, text in wanted.sparse.values()]
    with connection.cursor() as cursor:
        cursor.execute(f"SELECT {', '.join([*wanted.packed.values(), *wanted.floats.values(), *sparse])} {where}")
        rows = cursor.fetchall()
    dense = len(wanted.packed) + len(wanted.floats)
    columns: list[Any] = [
        np.array(column, dtype=np.int64 if place < len(wanted.packed) else np.float64)
        for place, column in enumerate(zip(*rows, strict=True) if rows else [()] * (dense + len(sparse)))
    ]
    filled = [
        column[(columns[2] & flag) != 0]
        for column, (flag, _) in zip(columns[dense:], wanted.sparse.values(), strict=True)
    ]
    return [*columns[:dense], dict(zip(wanted.sparse, filled, strict=True))]
