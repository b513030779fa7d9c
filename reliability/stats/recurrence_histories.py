"""Histories of units that fail more than once, validated once: every estimator of recurrence trusts them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import KW_ONLY, dataclass
from functools import cached_property
from typing import Any, Self

import numpy as np
from numpy.typing import ArrayLike, NDArray

from reliability.stats.difference_sums import label_codes
from reliability.stats.errors import StatisticsError
from reliability.stats.lifetimes import FloatArray, IntArray


class InvalidHistories(StatisticsError):
    """A history cannot be true; `unit` is the label of the first bad one, None where the whole column is meant."""

    def __init__(self, message: str, *, unit: Any = None) -> None:
        super().__init__(message)
        self.unit = unit


@dataclass(frozen=True, eq=False)
class Histories:
    """Failures of units (positions or modules) on each unit's own clock: its age, 0 when it was new or placed.

    units:       labels, one a unit, shape (n,)
    event_times: for each unit the ages at which it failed, a sequence of n sequences (empty where none); several at
                 one age are allowed; each lies in (start, end]
    starts:      age when observation began (0: from new), scalar or shape (n,)
    ends:        age when observation ended, > start, shape (n,): never the last failure by itself
    weights:     how many equal units a row stands for, > 0, scalar or shape (n,)
    clusters:    labels of units that may go wrong together (the module of each position), None or shape (n,)

    After construction `event_times` is one array of all ages, shape (m,), and `event_units` (m,) says whose they are
    (row number), sorted by unit and age. `from_rows` takes them in that flat form, in any order.
    Raises InvalidHistories with the first bad unit.
    """

    units: Any
    event_times: Any
    starts: Any
    ends: Any
    _: KW_ONLY
    weights: Any = 1
    clusters: Any = None

    def __post_init__(self) -> None:
        units = _labels(self.units)
        if isinstance(self.event_times, np.ndarray) and self.event_times.dtype != object and self.event_times.ndim < 2:
            raise InvalidHistories(
                "event_times is one list of numbers; give one list for each unit, or use Histories.from_rows."
            )
        events = [_numbers(times, "event_times") for times in self.event_times]
        if len(events) != units.size:
            raise InvalidHistories(
                f"event_times has {len(events)} lists; it must have one for each of {units.size} units."
            )
        owners = np.repeat(np.arange(units.size), [times.size for times in events])
        times = np.concatenate(events) if events else np.empty(0)
        self._validated(units, times, owners)

    @classmethod
    def from_rows(
        cls,
        units: Any,
        starts: ArrayLike,
        ends: ArrayLike,
        event_units: ArrayLike,
        event_times: ArrayLike,
        *,
        weights: ArrayLike = 1,
        clusters: Sequence[Any] | None = None,
    ) -> Self:
        """From flat columns: event_units (m,) are row numbers into `units`, event_times (m,) the ages."""
        made = object.__new__(cls)
        columns = {"starts": starts, "ends": ends, "weights": weights, "clusters": clusters}
        for name, value in columns.items():
            object.__setattr__(made, name, value)
        owners, times = np.asarray(event_units, dtype=np.int64), _numbers(event_times, "event_times")
        labels = _labels(units)
        if owners.shape != times.shape or owners.ndim != 1:
            raise InvalidHistories(
                f"event_units has shape {owners.shape} and event_times {times.shape}; they must agree."
            )
        if owners.size and not (owners.min() >= 0 and owners.max() < labels.size):
            raise InvalidHistories(f"event_units must be row numbers from 0 to {labels.size - 1}.")
        made._validated(labels, times, owners)
        return made

    def _validated(self, units: NDArray[Any], times: FloatArray, owners: IntArray) -> None:
        if units.size == 0:
            raise InvalidHistories("There are no units. Choose fewer restrictions.")
        columns = {name: _column(getattr(self, name), name, units.size) for name in ("starts", "ends", "weights")}
        starts, ends = columns["starts"], columns["ends"]
        _refuse(~(np.isfinite(starts) & (starts >= 0)), units, lambda row: f"observation began at {starts[row]:g}")
        _refuse(
            ~(np.isfinite(ends) & (ends > starts)),
            units,
            lambda row: f"observation ended at {ends[row]:g} and began at {starts[row]:g}; the end must be later",
        )
        weights = columns["weights"]
        _refuse(
            ~(np.isfinite(weights) & (weights > 0)), units, lambda row: f"the weight is {weights[row]:g}, not above 0"
        )
        order = np.lexsort((times, owners))
        times, owners = times[order], owners[order]
        outside = ~((times > starts[owners]) & (times <= ends[owners]))
        if outside.any():
            row, time = int(owners[np.argmax(outside)]), times[np.argmax(outside)]
            raise InvalidHistories(
                f"Unit {units[row]}: a failure at {time:g} lies outside its observation from {starts[row]:g} to "
                f"{ends[row]:g}. Correct the day, or leave the failure out.",
                unit=units[row],
            )
        clusters = None if self.clusters is None else label_codes(self.clusters, units.size)
        if clusters is not None and (weights != 1.0).any():
            raise InvalidHistories("Clusters need one row for each unit: leave out the weights.")
        values = columns | {"units": units, "event_times": times, "event_units": owners, "clusters": clusters}
        for name, value in values.items():
            if value is not None:
                value.flags.writeable = False
            object.__setattr__(self, name, value)

    event_units: IntArray = None  # type: ignore[assignment]

    def __len__(self) -> int:
        """Number of rows."""
        return int(self.units.size)

    @cached_property
    def failures(self) -> float:
        """Number of failures (weighted)."""
        return float(self.weights[self.event_units].sum())

    @cached_property
    def exposure(self) -> float:
        """Sum of weight x (end - start)."""
        return float(self.weights @ (self.ends - self.starts))

    @cached_property
    def event_counts(self) -> IntArray:
        """Failures of each unit, shape (n,)."""
        return np.bincount(self.event_units, minlength=len(self)).astype(np.int64)

    @cached_property
    def gaps(self) -> FloatArray:
        """Age gained since the unit's failure before, or since its start, for each failure, shape (m,)."""
        before = np.append(0.0, self.event_times[:-1])
        return self.event_times - np.where(self.is_first, self.starts[self.event_units], before)

    @cached_property
    def is_first(self) -> NDArray[np.bool_]:
        """True for the first failure of each unit, shape (m,)."""
        if self.event_units.size == 0:
            return np.zeros(0, dtype=bool)
        return np.append(True, np.diff(self.event_units) > 0)


def _numbers(values: Any, name: str) -> FloatArray:
    try:
        array = np.array(values, dtype=np.float64)
    except (TypeError, ValueError) as error:
        raise InvalidHistories(f"{name} must be numbers: {error}.") from error
    if array.ndim != 1:
        raise InvalidHistories(f"{name} must be a list of numbers; got shape {array.shape}.")
    return array


def _column(values: Any, name: str, count: int) -> FloatArray:
    try:
        array = np.asarray(values, dtype=np.float64)
    except (TypeError, ValueError) as error:
        raise InvalidHistories(f"{name} must be numbers: {error}.") from error
    if array.ndim == 0:
        return np.full(count, float(array))
    if array.shape != (count,):
        raise InvalidHistories(f"{name} has shape {array.shape}; it must have one value for each of {count} units.")
    return array.copy()


def _labels(values: Any) -> NDArray[Any]:
    array = np.array(values)
    if array.ndim != 1:
        # tuples as labels would otherwise become a second axis
        array = np.empty(len(values), dtype=object)
        array[:] = list(values)
    return array


def _refuse(bad: NDArray[np.bool_], units: NDArray[Any], reason: Any) -> None:
    if bad.any():
        row = int(np.argmax(bad))
        raise InvalidHistories(f"Unit {units[row]}: {reason(row)}.", unit=units[row])
