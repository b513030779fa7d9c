"""Positions of a forecast: validated, coded and grouped, so that equal ones are counted once."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, fields, replace
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from reliability.stats.errors import InvalidArgument

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

MOST_EXACT_ROWS = 600  # beyond this many distinct rows the ages of large groups are moved to shared nodes
SMALL_GROUP = 60  # positions; smaller groups keep their ages, their generating functions may pass through zero
MOST_HORIZONS = 24  # beyond this many, horizons of a site are moved to shared cells
NODE_STEP = 0.12
MANY_LABELS, TABLE = 50_000, 65_521
NO_DESIGN = np.zeros(1, dtype=np.int64)
COARSE_STEP = 0.2  # where failures are rare: four-point interpolation is then within half a per cent of their number


@dataclass(frozen=True, eq=False)
class Classes:
    """Positions alike in all but age and group share a class: one renewal kernel. Arrays of shape (classes,)."""

    site: IntArray
    horizon: FloatArray
    leave_at: FloatArray
    visit_every: FloatArray  # 0: failures are seen at once
    visit_next: FloatArray
    replace_at: FloatArray
    other_removals: FloatArray
    switch_at: FloatArray
    join_at: FloatArray
    oldest: FloatArray  # above the row's age: that is the least it can be, this the most
    running: IntArray  # the design that runs, is fitted from now on, and after the switch
    fitted: IntArray
    later: IntArray

    def __len__(self) -> int:
        return int(self.site.size)

    def distinct_from_new(self) -> tuple[IntArray, IntArray]:
        """First of each set of classes alike in all that matters once a new part is in, and each class's set."""
        columns = [
            getattr(self, item.name) for item in fields(Classes) if item.name not in ("running", "join_at", "oldest")
        ]
        return _distinct(columns, len(self))

    def take(self, chosen: NDArray[Any]) -> Classes:
        """The classes at these indices (or where this is True)."""
        return Classes(**{item.name: getattr(self, item.name)[chosen] for item in fields(Classes)})


@dataclass(frozen=True, eq=False)
class Rows:
    """Distinct positions sorted by class; arrays of shape (rows,).

    start: the day a new part goes in, NaN where one of age `age` runs now. extra: 1 where that fitting uses a part, 2
    where it is a planned replacement. weights: positions of each group (groups + 1, rows), the last line their total.
    """

    age: FloatArray
    start: FloatArray
    extra: IntArray
    class_index: IntArray
    weights: FloatArray
    classes: Classes
    site_labels: list[Any]
    group_labels: list[Any]
    cells: _Cells = field(repr=False)

    def __len__(self) -> int:
        return int(self.age.size)

    def of_classes(self, chosen: NDArray[np.bool_]) -> Rows:
        """The rows of the chosen classes, which are numbered anew."""
        number = np.cumsum(chosen) - 1
        kept = chosen[self.class_index]
        columns = {name: getattr(self, name)[kept] for name in ("age", "start", "extra")}
        return replace(
            self,
            **columns,
            class_index=number[self.class_index[kept]],
            weights=self.weights[:, kept],
            classes=self.classes.take(chosen),
        )

    def coarse(self) -> Rows:
        """All running positions on shared nodes, for draws in which failures are rare."""
        horizon = float(np.median(self.classes.horizon))
        cells = _on_nodes(self.cells, len(self.group_labels), horizon, COARSE_STEP, smallest=0)
        return _rows(_merged(cells), self.classes, self.site_labels, self.group_labels)


@dataclass(frozen=True, eq=False)
class _Cells:
    """Positions alike in everything: one line a class, group, start and age, arrays (cells,)."""

    class_index: IntArray
    group: IntArray
    start: FloatArray
    extra: IntArray
    age: FloatArray
    weight: FloatArray


def group_positions(
    ages: ArrayLike,
    horizons: ArrayLike,
    *,
    sites: Sequence[Any] | None,
    groups: Sequence[Any] | None,
    weights: ArrayLike | None,
    columns: dict[str, ArrayLike],
    designs: tuple[IntArray, IntArray, IntArray] = (NO_DESIGN, NO_DESIGN, NO_DESIGN),
) -> Rows:
    """Rows of the positions; `columns` are the further per-position figures of Classes and down_until.

    designs: codes of the running, the fitted and the later design, (n,) or one for all.
    """
    age = _column("ages", ages, None, least=0.0)
    count = age.size
    weight = np.ones(count) if weights is None else _column("weights", weights, count, least=0.0)
    horizon = _column("horizons", horizons, count, least=0.0)
    down = _column("down_until", columns.pop("down_until"), count, least=0.0)
    further = {name: _column(name, values, count, least=0.0) for name, values in columns.items()}
    _require_steady_visits(further)
    if (np.isfinite(further["replace_at"]) & (further["oldest"] > age)).any():
        raise InvalidArgument("oldest does not go with replace_at: give such parts as several, each of an age.")
    site, site_labels = _codes("sites", sites, count)
    same = groups is not None and groups is sites
    group, group_labels = (site, site_labels) if same else _codes("groups", groups, count)
    age, start, extra = _fresh_parts(age, down, further)
    horizon = _shared_horizons(horizon, site, weight)
    running, fitted, later = (_design(code, count) for code in designs)
    # a module that starts with a new part starts with what is fitted there
    running = np.where(np.isnan(start), running, fitted)
    class_columns: dict[str, Any] = {"site": site, "horizon": horizon, **further}
    class_columns |= {"running": running, "fitted": fitted, "later": later}
    class_first, class_index = _distinct(list(class_columns.values()), count)
    classes = Classes(**{name: column[class_first] for name, column in class_columns.items()})
    cells = _merged(_Cells(class_index, group, start, extra, age, weight))
    rows = _rows(cells, classes, site_labels, group_labels)
    if len(rows) <= MOST_EXACT_ROWS:
        return rows
    moved = _on_nodes(cells, len(group_labels), float(np.median(classes.horizon)), NODE_STEP, smallest=SMALL_GROUP)
    return _rows(_merged(moved), classes, site_labels, group_labels)


def _design(codes: IntArray, count: int) -> IntArray:
    try:
        return np.broadcast_to(codes, (count,))
    except ValueError:
        raise InvalidArgument(f"There are {codes.size} labels of designs for {count} positions.") from None


def _rows(cells: _Cells, classes: Classes, site_labels: list[Any], group_labels: list[Any]) -> Rows:
    first, inverse = _distinct([cells.class_index, cells.start, cells.extra, cells.age], cells.age.size)
    # with very many distinct rows the table of groups is made only after they have moved to nodes
    groups = len(group_labels) if first.size <= 20 * MOST_EXACT_ROWS else 0
    weights = np.zeros((groups + 1, first.size))
    if groups:
        np.add.at(weights, (cells.group, inverse), cells.weight)
        weights[-1] = weights[:-1].sum(axis=0)
    return Rows(
        age=cells.age[first],
        start=cells.start[first],
        extra=cells.extra[first],
        class_index=cells.class_index[first],
        weights=weights,
        classes=classes,
        site_labels=site_labels,
        group_labels=group_labels,
        cells=cells,
    )


def _merged(cells: _Cells) -> _Cells:
    columns = [cells.class_index, cells.group, cells.start, cells.extra, cells.age]
    first, inverse = _distinct(columns, cells.age.size)
    weight = np.bincount(inverse, cells.weight, minlength=first.size)
    return _Cells(*(column[first] for column in columns), weight)


def _column(name: str, values: ArrayLike, count: int | None, *, least: float) -> FloatArray:
    array = np.asarray(values, dtype=np.float64)
    if count is not None:
        try:
            array = np.broadcast_to(array, (count,))
        except ValueError:
            raise InvalidArgument(f"{name} has shape {array.shape}; there are {count} positions.") from None
    elif array.ndim != 1:
        raise InvalidArgument(f"{name} has shape {array.shape}; it must be a list, one entry a position.")
    if array.size and not (array >= least).all():
        wrong = array[~(array >= least)][0]
        raise InvalidArgument(f"{name} holds {wrong:g}; every entry must be a number of at least {least:g}.")
    if name in ("ages", "horizons", "weights", "other_removals") and not np.isfinite(array).all():
        raise InvalidArgument(f"{name} must be finite.")
    return array


def _require_steady_visits(columns: dict[str, FloatArray]) -> None:
    every, upcoming = columns["visit_every"], columns["visit_next"]
    if (upcoming > every + 1e-9).any():
        raise InvalidArgument("The next visit must come within one interval between visits.")


def _codes(name: str, labels: Sequence[Any] | None, count: int) -> tuple[IntArray, list[Any]]:
    """Codes in order of first appearance; a dictionary is ten times faster than sorting a million labels."""
    if labels is None:
        return np.zeros(count, dtype=np.int64), [None]
    if len(labels) != count:
        raise InvalidArgument(f"{name} holds {len(labels)} labels; there are {count} positions.")
    if isinstance(labels, np.ndarray) and labels.dtype.kind in "iub":
        distinct, codes = np.unique(labels, return_inverse=True)
        return codes.astype(np.int64), distinct.tolist() or [None]
    if isinstance(labels, np.ndarray) and labels.dtype.kind == "U" and count > MANY_LABELS:
        found = _text_codes(np.ascontiguousarray(labels))
        if found is not None:
            return found
    listed = labels.tolist() if isinstance(labels, np.ndarray) else list(labels)
    known = {label: number for number, label in enumerate(dict.fromkeys(listed))}
    codes = np.fromiter(map(known.__getitem__, listed), dtype=np.int64, count=count)
    return codes, list(known) or [None]


def _text_codes(labels: NDArray[np.str_]) -> tuple[IntArray, list[Any]] | None:
    """The same for texts of one width, by a table of their remainders; None where two texts share a place in it."""
    letters = labels.view(np.uint32).reshape(labels.size, -1)
    key = np.zeros(labels.size, dtype=np.uint64)
    for column in letters.T:
        key = key * np.uint64(1_000_003) + column
    place = (key % np.uint64(TABLE)).astype(np.int64)
    first = np.full(TABLE, -1, dtype=np.int64)
    first[place[::-1]] = np.arange(labels.size - 1, -1, -1)
    leaders = np.sort(first[first >= 0])
    code = np.empty(TABLE, dtype=np.int64)
    code[place[leaders]] = np.arange(leaders.size)
    codes = code[place]
    names = labels[leaders]
    return (codes, names.tolist()) if (names[codes] == labels).all() else None


def _fresh_parts(
    age: FloatArray, down: FloatArray, further: dict[str, FloatArray]
) -> tuple[FloatArray, FloatArray, IntArray]:
    """Start day and parts used at it, for stopped modules and for parts already overdue for planned replacement."""
    # where crews come only at visits the overdue part runs on to the next one
    overdue = (down == 0) & (age >= further["replace_at"]) & (further["visit_every"] == 0)
    if not overdue.any() and not down.any():
        return age, np.broadcast_to(np.nan, age.shape), np.broadcast_to(np.int64(0), age.shape)
    start = np.where(down > 0, down, np.where(overdue, further["join_at"], np.nan))
    fresh = ~np.isnan(start)
    # 2 marks a planned replacement
    extra = np.where(overdue, 2, np.where(fresh, 1, 0)).astype(np.int64)
    return np.where(fresh, 0.0, age), start, extra


def _distinct(columns: list[NDArray[Any]], count: int) -> tuple[IntArray, IntArray]:
    """Index of the first of each set of equal rows, and each row's set, ordered by the first column first."""
    key = np.zeros(count, dtype=np.int64)
    size = 1
    for column in columns:
        if not count or column.strides == (0,) or (column == column[0]).all() or (column != column).all():
            continue
        code = _dense_codes(column)
        width = int(code.max()) + 1
        if size * width >= 2**62:
            key = np.unique(key, return_inverse=True)[1]
            size = int(key.max()) + 1
        key = key * width + code
        size *= width
    if 0 < size <= 4 * count + 1000:
        # counting is faster than sorting
        present = np.bincount(key, minlength=size) > 0
        first = np.empty(size, dtype=np.int64)
        first[key[::-1]] = np.arange(count - 1, -1, -1)
        return first[present], (np.cumsum(present) - 1)[key]
    _, first, inverse = np.unique(key, return_index=True, return_inverse=True)
    return first, inverse


def _dense_codes(column: NDArray[Any]) -> IntArray:
    whole = column.astype(np.int64) if column.dtype.kind == "i" or np.isfinite(column).all() else None
    if whole is not None and np.abs(column).max() < 4e6 and (whole == column).all():
        return whole - whole.min()
    return np.unique(column, return_inverse=True)[1]


def _shared_horizons(horizon: FloatArray, site: IntArray, weight: FloatArray) -> FloatArray:
    """Horizons of a site that lie within a cell (about 3 %) are replaced by their mean where there are very many."""
    if not horizon.size or horizon.strides == (0,) or np.unique(horizon).size <= MOST_HORIZONS:
        return horizon
    logs = np.log(np.maximum(horizon, 1e-9 * max(float(horizon.max()), 1e-300)))
    width = max(0.03, (logs.max() - logs.min()) / 200.0)
    cell = np.rint((logs - logs.min()) / width).astype(np.int64)
    _, key = np.unique(site * (int(cell.max()) + 1) + cell, return_inverse=True)
    mass = np.bincount(key, weight)
    means = np.bincount(key, weight * horizon) / np.where(mass > 0, mass, 1.0)
    return means[key]


def _on_nodes(cells: _Cells, groups: int, horizon: float, spacing: float, *, smallest: int) -> _Cells:
    """Ages of large groups moved to shared nodes by four-point interpolation of the log generating function.

    Nodes are evenly spaced in log(age + horizon / 4); weights may come out fractional and slightly negative, which a
    sum of logarithms does not mind. Small groups, and positions that start with a new part, stay as they are.
    """
    group_key = cells.class_index * groups + cells.group
    large = np.bincount(group_key, cells.weight)[group_key] > smallest
    moved = large & np.isnan(cells.start)
    offset = horizon / 4.0 or 1.0
    place = np.log((cells.age[moved] + offset) / offset) / spacing
    last = max(int(np.ceil(place.max(initial=0.0))), 3)
    left = np.clip(np.floor(place).astype(np.int64), 1, last - 2)
    shift = place - left
    lagrange = [
        -shift * (shift - 1) * (shift - 2) / 6.0,
        (shift + 1) * (shift - 1) * (shift - 2) / 2.0,
        -(shift + 1) * shift * (shift - 2) / 2.0,
        (shift + 1) * shift * (shift - 1) / 6.0,
    ]
    node_key = group_key[moved] * (last + 1) + left
    total = np.zeros((int(group_key.max(initial=0)) + 1) * (last + 1) + 2)
    for step, share in zip((-1, 0, 1, 2), lagrange, strict=True):
        total += np.bincount(node_key + step, share * cells.weight[moved], minlength=total.size)
    used = np.flatnonzero(total)
    outer, node = np.divmod(used, last + 1)
    nodes = _Cells(
        class_index=outer // groups,
        group=outer % groups,
        start=np.full(used.size, np.nan),
        extra=np.zeros(used.size, dtype=np.int64),
        age=offset * np.expm1(spacing * node),
        weight=total[used],
    )
    names = [item.name for item in fields(_Cells)]
    return _Cells(*(np.concatenate([getattr(nodes, name), getattr(cells, name)[~moved]]) for name in names))
