"""Tails of every row of a forecast, for the whole horizon and for each window of it, given some posterior draws."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reliability.stats.count_kernel import FromNew, Transform, at_place, delayed_tails
from reliability.stats.count_lattice import VisitGrid
from reliability.stats.count_masses import Ends, Hazards, MidpointGrid
from reliability.stats.count_positions import Rows

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class Block:
    """Rows that share a kind of grid; `window_edges` are shares of the horizon, (windows + 1,) or empty."""

    grid: MidpointGrid | VisitGrid
    rows: Rows
    window_edges: FloatArray

    def places(self) -> list[tuple[IntArray, IntArray]]:
        """(begin, end) places of the whole horizon, then of each window, for each class."""
        classes = self.rows.classes
        spans = [(0.0, 1.0), *zip(self.window_edges[:-1], self.window_edges[1:], strict=True)]
        return [tuple(self._place(share * classes.horizon) for share in span) for span in spans]

    def _place(self, time: FloatArray) -> IntArray:
        place = self.grid.place_of(np.minimum(time, self.rows.classes.leave_at), self.rows.classes)
        if isinstance(self.grid, MidpointGrid):
            # whole cells, so that no mass lies on an edge
            return 2 * np.rint(place / 2.0).astype(np.int64)
        return place.astype(np.int64)


class BlockTails:
    """Masses and kernels of one block for some draws; `targets` yields the tails of one kind of end."""

    def __init__(self, block: Block, hazards: Hazards, following: Hazards | None, duty: FloatArray) -> None:
        self._block, self._duty = block, duty
        grid, rows = block.grid, block.rows
        self._transform = Transform(grid.places, 0.0 if isinstance(grid, VisitGrid) else 0.5)
        self._new, self._new_by = grid.new(hazards, rows.classes, duty)
        self._next = None if following is None else grid.new(following, rows.classes, duty)
        on_lattice = isinstance(grid, VisitGrid)
        self._running = np.flatnonzero(np.isnan(rows.start) | on_lattice)
        self._fresh = np.flatnonzero(~np.isnan(rows.start) & (not on_lattice))
        self._ends, self._planned, self._planned_place = grid.running(hazards, rows, self._running, duty)
        self._places = block.places()

    def targets(self, kind: str) -> Iterator[FloatArray]:
        """Tails P(N >= k), k = 1 .., (draws, rows, orders), of the whole horizon and of each window."""
        kernel = self._kernel(self._new, self._new_by, kind)
        whole = kernel.tails()
        following = None if self._next is None else self._kernel(*self._next, kind)
        known: dict[int, FloatArray] = {}
        for number, (begin, end) in enumerate(self._places):
            if following is not None:
                yield self._target(kind, number, self._switched(kernel, whole, following, begin, end))
                continue
            widths = np.where(begin == 0, self._block.grid.places, end - begin)
            for width in np.unique(widths):
                if width not in known:
                    all_inside = width >= self._block.grid.places
                    known[width] = whole if all_inside else kernel.window_tails(whole, int(width))
            yield self._target(kind, number, _by_class(known, widths))

    def _kernel(self, masses: Ends, shares: Ends, kind: str) -> FromNew:
        return FromNew(self._transform, *masses.split(kind), shares.split(kind)[0])

    def _switched(
        self, kernel: FromNew, whole: FloatArray, following: FromNew, begin: IntArray, end: IntArray
    ) -> FloatArray:
        """Remaining tails where parts fitted after the switch live by the next design."""
        classes = self._block.rows.classes
        switch = np.rint(self._block.grid.place_of(np.minimum(classes.switch_at, classes.horizon), classes))
        next_whole = following.tails()
        orders = max(whole.shape[2], next_whole.shape[2]) + 1
        reference = np.zeros((*whole.shape[:2], orders, whole.shape[3]))
        mixed = np.zeros_like(reference)
        settings = np.stack([np.where(begin == 0, self._block.grid.places, end - begin), end - switch.astype(np.int64)])
        for width, until in np.unique(settings, axis=1).T:
            same = (settings[0] == width) & (settings[1] == until)
            window = next_whole if width >= whole.shape[3] else following.window_tails(next_whole, int(width))
            mixed[:, same] = kernel.staged_tails(reference, int(width), window, int(until))[:, same]
        return mixed

    def _target(self, kind: str, number: int, remaining: FloatArray) -> FloatArray:
        rows = self._block.rows
        begin, end = self._places[number]
        counted, silent = self._ends.split(kind)
        tails = np.zeros((remaining.shape[0], len(rows), remaining.shape[2] - 1))
        first_rows = np.searchsorted(rows.class_index[self._running], np.arange(len(rows.classes) + 1))
        for index in range(len(rows.classes)):
            chosen = slice(first_rows[index], first_rows[index + 1])
            if chosen.start == chosen.stop or end[index] <= begin[index]:
                continue
            width = int(end[index] - begin[index]) if begin[index] else self._block.grid.places
            tails[:, self._running[chosen]] = delayed_tails(
                counted[:, chosen],
                None if silent is None else silent[:, chosen],
                self._block.grid.at,
                remaining[:, index],
                int(end[index]),
                self._transform.up_to(width),
            )
        if self._planned is not None:
            tails[:, self._running] += self._planned_part(kind, remaining, begin, end)
        if self._fresh.size:
            tails[:, self._fresh] = self._fresh_tails(remaining, end)
        return self._with_extra(kind, tails, begin, end)

    def _planned_part(self, kind: str, remaining: FloatArray, begin: IntArray, end: IntArray) -> FloatArray:
        """What follows the planned replacement of the running part, weighted by its chance."""
        which = self._block.rows.class_index[self._running]
        result = np.empty((remaining.shape[0], which.size, remaining.shape[2] - 1))
        for draw in range(remaining.shape[0]):
            for index in np.unique(which):
                mine = which == index
                left = end[index] - self._planned_place[draw, mine]
                read = at_place(remaining[draw : draw + 1, index], left)[0]
                inside = (left <= end[index] - begin[index])[:, None] & (kind != "failures")
                follow = np.where(inside, read[:, :-1], read[:, 1:]) * (left >= 0)[:, None]
                result[draw, mine] = follow * self._planned[draw, mine][:, None]
        return result

    def _fresh_tails(self, remaining: FloatArray, end: IntArray) -> FloatArray:
        rows = self._block.rows
        which = rows.class_index[self._fresh]
        start = self._block.grid.place_of(rows.start[self._fresh], _Fewer(rows.classes.horizon[which]))
        tails = np.zeros((remaining.shape[0], which.size, remaining.shape[2] - 1))
        for index in np.unique(which):
            mine = which == index
            tails[:, mine] = at_place(remaining[:, index], end[index] - start[mine])[..., 1:]
        return tails

    def _with_extra(self, kind: str, tails: FloatArray, begin: IntArray, end: IntArray) -> FloatArray:
        """Parts used by putting a stopped module right, and by overdue replacements, come on top."""
        rows = self._block.rows
        relevant = rows.extra == 2 if kind == "planned" else rows.extra > 0
        if kind == "failures" or not relevant.any():
            return tails
        start = np.nan_to_num(rows.start)
        classes = rows.classes
        place = self._block.grid.place_of(start, _Fewer.of(classes, rows.class_index))
        low, high = begin[rows.class_index], end[rows.class_index]
        used = relevant & (place <= high) & ((place > low) | (low == 0)) & (high > 0)
        longer = np.concatenate([tails, np.zeros_like(tails[..., :1])], axis=2)
        longer[:, used, 1:] = tails[:, used]
        longer[:, used, 0] = 1.0
        return longer


@dataclass(frozen=True, eq=False)
class _Fewer:
    """The figures of classes that a grid needs to place a time, row by row."""

    horizon: FloatArray
    visit_every: FloatArray | None = None
    visit_next: FloatArray | None = None

    @classmethod
    def of(cls, classes: object, which: IntArray) -> _Fewer:
        names = ("horizon", "visit_every", "visit_next")
        return cls(*(getattr(classes, name)[which] for name in names))


def _by_class(known: dict[int, FloatArray], widths: IntArray) -> FloatArray:
    """The remaining tails of each class for its own window width."""
    distinct = np.unique(widths)
    if distinct.size == 1:
        return known[distinct[0]]
    orders = max(known[width].shape[2] for width in distinct)
    first = known[distinct[0]]
    merged = np.zeros((*first.shape[:2], orders, first.shape[3]))
    for width in distinct:
        same = widths == width
        merged[:, same, : known[width].shape[2]] = known[width][:, same]
    return merged
