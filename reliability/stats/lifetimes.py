"""Life data, validated once: every estimator takes a `Lifetimes` and trusts it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import KW_ONLY, dataclass
from functools import cached_property
from typing import Any, Self

import numpy as np
from numpy.typing import ArrayLike, NDArray

from reliability.stats.errors import InvalidLifetimes
from reliability.stats.ranks import as_whole, first_rows, ranked

# of float64; numpy's own stubs take sums of weights for whole numbers, so more cannot be said
FloatArray = NDArray[Any]
BoolArray = NDArray[np.bool_]
IntArray = NDArray[np.int64]
INDEXES = ("_site_index", "_group_index")
SQUEEZED = 4  # a key with so many times as many values as rows is squeezed before it is multiplied on


@dataclass(frozen=True, eq=False)
class Lifetimes:
    """Lives of parts on one clock, one row a life (or `weights` equal lives).

    durations: age when observation ended, > 0, any unit (days, hours, strokes), shape (n,)
    observed:  True where a failure ended it, False where the part was withdrawn or still runs, shape (n,)
    entries:   age when observation began (left truncation), 0 from new, scalar or shape (n,), entry < duration
    last_good: age when the part was last known good; the failure lies in (last_good, duration]. None or NaN where
               the failure's age is known. Ignored on rows that did not fail; equal to the duration it means exact
    weights:   how many equal lives a row stands for, > 0, scalar or shape (n,)
    sites, groups: labels of any kind, None or shape (n,)

    After construction the columns are read-only numpy arrays of shape (n,): floats, `observed` booleans, and
    `last_good` always present with NaN where there is no interval. Whole numbers stay exact up to 2**53, so equal
    ages stay tied. Raises InvalidLifetimes with the first bad row.
    """

    durations: Any
    observed: Any
    _: KW_ONLY
    entries: Any = 0
    last_good: Any = None
    weights: Any = 1
    sites: Any = None
    groups: Any = None

    def __post_init__(self) -> None:
        durations = _numbers(self.durations, "durations")
        if durations.ndim != 1 or durations.size == 0:
            raise InvalidLifetimes(f"durations must be a list of at least one age; got shape {durations.shape}.")
        count = durations.size
        columns = {
            "durations": durations,
            "observed": _flags(self.observed, count),
            "entries": _column(self.entries, "entries", count),
            "last_good": _column(np.nan if self.last_good is None else self.last_good, "last_good", count),
            "weights": _column(self.weights, "weights", count),
            "sites": _labels(self.sites, "sites", count),
            "groups": _labels(self.groups, "groups", count),
        }
        columns["last_good"] = _meaningful_last_good(columns)
        _check_rows(columns)
        self._store(columns)

    def _store(self, columns: dict[str, Any]) -> None:
        for name, column in columns.items():
            if column is not None:
                column = column.view()
                column.flags.writeable = False
            object.__setattr__(self, name, column)

    @classmethod
    def _trusted(cls, columns: dict[str, Any], known: dict[str, Any] | None = None) -> Self:
        """Rows already known to be valid: no second validation. known: the index of labels, where it is known."""
        made = object.__new__(cls)
        made._store(columns)
        made.__dict__.update(known or {})
        return made

    def knowing(self, **indexes: tuple[NDArray[Any], IntArray]) -> Self:
        """The same with the distinct labels of `sites` or `groups` in order, and each row's place among them, given:
        finding them among a million texts takes a second."""
        known = {f"_{name.removesuffix('s')}_index": index for name, index in indexes.items()}
        return self._trusted(self._columns(), {**self._known(), **known})

    def _known(self, *without: str) -> dict[str, Any]:
        """The indexes of labels that were asked for before, for the same rows."""
        return {name: self.__dict__[name] for name in INDEXES if name in self.__dict__ and name not in without}

    def _known_of(self, rows: NDArray[Any]) -> dict[str, Any]:
        """The same for some of the rows: labels that none of them has are left away."""
        return {name: _index_of(labels, codes, rows) for name, (labels, codes) in self._known().items()}

    def _columns(self) -> dict[str, Any]:
        names = ("durations", "observed", "entries", "last_good", "weights", "sites", "groups")
        return {name: getattr(self, name) for name in names}

    def __len__(self) -> int:
        """Number of rows (not of lives: see `count`)."""
        return int(self.durations.size)

    @cached_property
    def count(self) -> float:
        """Number of lives: the sum of the weights."""
        return float(self.weights.sum())

    @cached_property
    def failures(self) -> float:
        """Number of lives ended by a failure (weighted), intervals included."""
        return float(self.weights[self.observed].sum())

    @cached_property
    def exposure(self) -> float:
        """Sum of weight x (duration - entry), in the unit of the durations."""
        return float(self.weights @ (self.durations - self.entries))

    @cached_property
    def is_interval(self) -> BoolArray:
        """True where the failure is known only to lie in (last_good, duration], shape (n,)."""
        return ~np.isnan(self.last_good)

    @cached_property
    def is_exact(self) -> BoolArray:
        """True where the failure's age is known, shape (n,)."""
        return self.observed & ~self.is_interval

    @cached_property
    def has_intervals(self) -> bool:
        return bool(self.is_interval.any())

    @cached_property
    def has_entries(self) -> bool:
        """True where some life came under observation after age 0."""
        return bool((self.entries > 0).any())

    @cached_property
    def _site_index(self) -> tuple[NDArray[Any], IntArray]:
        return _index_labels(self.sites, len(self))

    @cached_property
    def _group_index(self) -> tuple[NDArray[Any], IntArray]:
        return _index_labels(self.groups, len(self))

    @property
    def site_labels(self) -> NDArray[Any]:
        """The distinct sites, shape (number of sites,); empty without sites."""
        return self._site_index[0]

    @property
    def site_codes(self) -> IntArray:
        """Index into `site_labels` for each row, shape (n,); zeros without sites."""
        return self._site_index[1]

    @property
    def group_labels(self) -> NDArray[Any]:
        """The distinct groups, shape (number of groups,); empty without groups."""
        return self._group_index[0]

    @property
    def group_codes(self) -> IntArray:
        """Index into `group_labels` for each row, shape (n,); zeros without groups."""
        return self._group_index[1]

    def grouped(self) -> Self:
        """The same lives with equal rows (all columns alike) merged and their weights added; sorted by duration."""
        return self.grouped_with(np.zeros(len(self), dtype=np.int64))[0]

    def grouped_with(self, codes: IntArray) -> tuple[Self, IntArray]:
        """The same where only rows with equal codes (numbers of at least 0) are merged, and the codes that are left."""
        key = _combined_key(
            [self.durations, self.entries, self.last_good, self.observed], [self.site_codes, self.group_codes, codes]
        )
        distinct, inverse = ranked(key)
        first = first_rows(inverse, distinct.size)
        columns = {name: _take(column, first) for name, column in self._columns().items()}
        columns["weights"] = np.bincount(inverse, weights=self.weights, minlength=first.size).astype(np.float64)
        return self._trusted(columns, self._known_of(first)), codes[first]

    def subset(self, mask: ArrayLike) -> Self:
        """The rows where mask (booleans or row numbers) says so. Raises InvalidLifetimes where none is left."""
        index = np.asarray(mask)
        columns = {name: _take(column, index) for name, column in self._columns().items()}
        kept = columns["durations"]
        if kept is None or kept.size == 0:
            raise InvalidLifetimes("No life is left after this choice. Choose fewer restrictions.")
        return self._trusted(columns, self._known_of(index))

    def reweighted(self, weights: ArrayLike) -> Self:
        """The same rows with other weights, shape (n,). Raises InvalidLifetimes where one is not above 0."""
        columns = self._columns()
        columns["weights"] = _column(weights, "weights", len(self))
        _check_rows(columns)
        return self._trusted(columns, self._known())

    def with_groups(self, groups: ArrayLike) -> Self:
        """The same rows with other groups, shape (n,)."""
        columns = self._columns()
        columns["groups"] = _labels(groups, "groups", len(self))
        return self._trusted(columns, self._known("_group_index"))

    def withdrawn_where(self, mask: ArrayLike) -> Self:
        """The same lives with the failures where mask is True counted as withdrawn at their durations."""
        columns = self._columns()
        mask = np.asarray(mask, dtype=bool)
        columns["observed"] = self.observed & ~mask
        columns["last_good"] = np.where(mask, np.nan, self.last_good)
        return self._trusted(columns, self._known())

    def recut(self, durations: FloatArray, observed: BoolArray, entries: FloatArray, last_good: FloatArray) -> Self:
        """The same lives observed for another part of their time; the caller answers for entries below durations."""
        known_age = ~observed | (last_good == durations)
        columns = {**self._columns(), "durations": durations, "observed": observed, "entries": entries}
        columns["last_good"] = np.where(known_age, np.nan, last_good)
        return self._trusted(columns, self._known())

    def counted_when_found(self) -> Self:
        """The same lives with interval failures counted at the age at which they were found."""
        if not self.has_intervals:
            return self
        columns = self._columns()
        columns["last_good"] = np.broadcast_to(np.float64(np.nan), (len(self),))
        return self._trusted(columns, self._known())


def _numbers(values: Any, name: str) -> FloatArray:
    array = np.asarray(values)
    if array.dtype.kind not in "iufO":
        raise InvalidLifetimes(f"{name} must be numbers; got values of type {array.dtype}.")
    if array.dtype.kind == "O" and any(isinstance(value, str) for value in array.ravel()):
        raise InvalidLifetimes(f"{name} must be numbers; got text among them.")
    try:
        return np.array(array, dtype=np.float64)
    except (TypeError, ValueError) as error:
        raise InvalidLifetimes(f"{name} must be numbers: {error}.") from error


def _column(values: Any, name: str, count: int) -> FloatArray:
    array = _numbers(values, name)
    if array.ndim == 0:
        # a broadcast scalar costs no memory, and a million rows from new need none for their entries
        return np.broadcast_to(array, (count,))
    if array.shape != (count,):
        raise InvalidLifetimes(f"{name} has shape {array.shape}; it must have one value for each of {count} durations.")
    return array


def _flags(values: Any, count: int) -> BoolArray:
    array = np.asarray(values)
    if array.ndim == 0 and array.dtype.kind in "biuf":
        array = np.broadcast_to(array, (count,))
    if array.shape != (count,):
        raise InvalidLifetimes(
            f"observed has shape {array.shape}; it must have one value for each of {count} durations."
        )
    if array.dtype.kind == "b":
        return np.array(array)
    wrong = [row for row, value in enumerate(array.tolist()) if isinstance(value, str) or value not in (0, 1)]
    if wrong:
        row = wrong[0]
        raise InvalidLifetimes(
            f"Row {row}: observed is {array[row]!r}; it must be True (failed) or False (withdrawn or running).", row=row
        )
    return array.astype(bool)


def _labels(values: Any, name: str, count: int) -> NDArray[Any] | None:
    if values is None:
        return None
    array = np.array(values)
    if array.shape != (count,):
        # tuples as labels would otherwise become a second axis
        array = np.empty(len(values), dtype=object)
        array[:] = list(values)
    if array.shape != (count,):
        raise InvalidLifetimes(f"{name} has shape {array.shape}; it must have one label for each of {count} durations.")
    return array


def _meaningful_last_good(columns: dict[str, Any]) -> FloatArray:
    last_good = columns["last_good"]
    if np.isnan(last_good).all():
        return last_good
    known_age = ~columns["observed"] | (last_good == columns["durations"])
    return np.where(known_age, np.nan, last_good)


def _check_rows(columns: dict[str, Any]) -> None:
    durations, entries, weights = columns["durations"], columns["entries"], columns["weights"]
    last_good = columns["last_good"]
    _refuse(
        ~(np.isfinite(durations) & (durations > 0)),
        lambda row: (
            f"the age is {durations[row]:g}; it must be a number above 0. "
            "A part that failed on the day it was fitted is the interval from 0 to 1"
        ),
    )
    _refuse(
        ~(np.isfinite(entries) & (entries >= 0)),
        lambda row: f"observation began at age {entries[row]:g}; it must be a number of at least 0",
    )
    _refuse(
        entries >= durations,
        lambda row: (
            f"observation began at age {entries[row]:g}, not before its end at {durations[row]:g}. "
            "Leave the row out: nothing was observed"
        ),
    )
    _refuse(
        ~(np.isfinite(weights) & (weights > 0)),
        lambda row: f"the weight is {weights[row]:g}; it must be a number above 0. Leave out rows that count for none",
    )
    with np.errstate(invalid="ignore"):
        _refuse(
            last_good > durations,
            lambda row: f"last known good at age {last_good[row]:g}, after the failure at {durations[row]:g}",
        )
        _refuse(
            last_good < entries,
            lambda row: (
                f"last known good at age {last_good[row]:g}, before observation began at {entries[row]:g}. "
                "A part under observation was good when observation began"
            ),
        )


def _refuse(bad: BoolArray, reason: Any) -> None:
    if bad.any():
        row = int(np.argmax(bad))
        raise InvalidLifetimes(f"Row {row}: {reason(row)}.", row=row)


def _index_labels(labels: NDArray[Any] | None, count: int) -> tuple[NDArray[Any], IntArray]:
    if labels is None:
        return np.empty(0, dtype=object), np.zeros(count, dtype=np.int64)
    try:
        distinct, codes = np.unique(labels, return_inverse=True)
    except TypeError:
        # labels of mixed kinds (None beside text) have no order; take them as they come
        known: dict[Any, int] = {}
        codes = np.array([known.setdefault(label, len(known)) for label in labels.tolist()])
        distinct = np.empty(len(known), dtype=object)
        distinct[:] = list(known)
    return distinct, codes.astype(np.int64)


def _index_of(labels: NDArray[Any], codes: IntArray, rows: NDArray[Any]) -> tuple[NDArray[Any], IntArray]:
    codes = codes[rows]
    if not labels.size:
        return labels, codes
    there = np.bincount(codes, minlength=labels.size) > 0
    return (labels, codes) if there.all() else (labels[there], (np.cumsum(there) - 1)[codes])


def _combined_key(columns: Sequence[NDArray[Any]], codes: Sequence[IntArray]) -> IntArray:
    """One whole number a row, equal where all columns are equal, ordered by the first column first."""
    key = np.zeros(columns[0].size, dtype=np.int64)
    size = 1
    parts = [column for column in columns if not _constant(column)]
    for part in [_placed(column) for column in parts] + [c for c in codes if c.any()]:
        width = int(part.max()) + 1
        # squeezed before the product overflows, and while a table holds it: the order is kept
        if size * width >= 2**62 or size > SQUEEZED * key.size:
            key = ranked(key)[1]
            size = int(key.max()) + 1
        key = key * width + part
        size *= width
    return key


def _placed(column: NDArray[Any]) -> IntArray:
    """The place of each value among the distinct ones, NaN last."""
    whole = column.astype(np.int64) if column.dtype == bool else as_whole(column)
    if whole is None:
        return np.unique(column, return_inverse=True)[1].astype(np.int64)
    distinct, codes = ranked(whole)
    if distinct[0] >= 0:
        return codes
    return np.where(codes == 0, distinct.size, codes) - 1


def _constant(column: NDArray[Any]) -> bool:
    return column.strides == (0,) or bool((column == column[0]).all()) or bool((column != column).all())


def _take(column: NDArray[Any] | None, index: NDArray[Any]) -> NDArray[Any] | None:
    if column is None:
        return None
    if column.strides == (0,):
        return np.broadcast_to(column[:1].reshape(()), column[index].shape)
    return column[index]
