"""Which lives share a multiplier on their hazard: the sites, or positions at sites, common to all groups."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from reliability.stats.difference_sums import label_codes
from reliability.stats.errors import InvalidArgument
from reliability.stats.lifetimes import IntArray, Lifetimes
from reliability.stats.ranks import first_rows, ranked


def shared_clusters(
    before: Lifetimes, after: Lifetimes, sites: Any, positions: Any, past: Lifetimes | None = None
) -> tuple[IntArray, ...] | None:
    """Numbers of the sites (or positions at sites) common to all groups; None where there are fewer than two."""
    groups = [before, after] if past is None else [before, after, past]
    columns: list[IntArray] = []
    if sites is None and all(lives.sites is not None for lives in groups):
        columns.append(_own_sites(groups))
    columns += [_joined(given, groups) for given in (sites, positions) if given is not None]
    if not columns:
        return None
    codes = columns[0]
    for column in columns[1:]:
        codes = _pairs(codes, column)
    if codes.max() < 1:
        return None
    return tuple(np.split(codes, np.cumsum([len(lives) for lives in groups])[:-1]))


def _pairs(first: IntArray, second: IntArray) -> IntArray:
    """Numbers of the pairs; where each of the second has one of the first only (positions stand still), its own."""
    of_second = first[first_rows(second, int(second.max()) + 1)]
    if (of_second[second] == first).all():
        return second
    return ranked(first * (int(second.max()) + 1) + second)[1]


def _own_sites(groups: list[Lifetimes]) -> IntArray:
    """The sites that the lives carry, numbered alike in all groups."""
    labels = list(dict.fromkeys(label for lives in groups for label in lives.site_labels.tolist()))
    place = {label: number for number, label in enumerate(sorted(labels, key=str))}
    tables = [np.array([place[label] for label in lives.site_labels.tolist()], dtype=np.int64) for lives in groups]
    codes = np.concatenate([table[lives.site_codes] for table, lives in zip(tables, groups, strict=True)])
    return ranked(codes)[1]


def _joined(given: Any, groups: list[Lifetimes]) -> IntArray:
    """Labels of all groups one after the other, as numbers."""
    try:
        parts = [np.asarray(given[number]) for number in range(len(groups))]
    except (TypeError, IndexError) as error:
        raise InvalidArgument(
            "sites and positions are pairs of lists: of the old lives, of the new (and a third of the past)."
        ) from error
    if any(part.ndim == 0 or len(part) != len(lives) for part, lives in zip(parts, groups, strict=True)):
        wanted = " and ".join(str(len(lives)) for lives in groups)
        raise InvalidArgument(f"sites and positions must have one label for each of {wanted} lives.")
    if all(part.ndim == 1 and part.dtype.kind in "iu" for part in parts):
        return ranked(np.concatenate(parts).astype(np.int64))[1]
    labels: NDArray[Any] = np.empty(sum(len(lives) for lives in groups), dtype=object)
    labels[:] = [
        tuple(label) if isinstance(label, list) else label for number in range(len(groups)) for label in given[number]
    ]
    return label_codes(labels, labels.size)
