"""Distinct whole numbers and which of them each value is, by counting where they lie close together: sorting a million
takes ten times as long."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

IntArray = NDArray[np.int64]

SPARSE = 8  # a table may be so many times as long as the column
SMALLEST_TABLE = 1 << 16
LARGEST_WHOLE = 2.0**50


def ranked(values: IntArray) -> tuple[IntArray, IntArray]:
    """The distinct values in rising order, and each value's place among them; as np.unique with its inverse."""
    if values.size == 0:
        return values.astype(np.int64), np.zeros(0, dtype=np.int64)
    least = int(values.min())
    width = int(values.max()) - least + 1
    if width > max(SPARSE * values.size, SMALLEST_TABLE):
        distinct, codes = np.unique(values, return_inverse=True)
        return distinct, codes.astype(np.int64)
    shifted = values - least if least else values
    there = np.zeros(width, dtype=bool)
    there[shifted] = True
    distinct = np.flatnonzero(there)
    places = np.cumsum(there, dtype=np.int64) - 1
    return distinct + least, places[shifted]


def first_rows(codes: IntArray, count: int) -> IntArray:
    """The first row of each code from 0 to count - 1; every code occurs."""
    rows = np.empty(count, dtype=np.int64)
    rows[codes[::-1]] = np.arange(codes.size - 1, -1, -1)
    return rows


def as_whole(values: NDArray[Any]) -> IntArray | None:
    """Whole numbers of at least 0 as such, NaN as -1; None where a value is neither. Ages in days or strokes are."""
    missing = np.isnan(values)
    filled = np.where(missing, -1.0, values) if missing.any() else values
    if not (np.abs(filled) < LARGEST_WHOLE).all():
        return None
    whole = filled.astype(np.int64)
    return whole if (whole == filled).all() and (whole >= -1).all() and not (values == -1).any() else None
