"""Tails of every row of a forecast, for the whole horizon and for each window of it, given some posterior draws."""

from __future__ import annotations

from copy import copy
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reliability.stats.count_kernel import FromNew, Transform
from reliability.stats.count_lattice import VisitGrid
from reliability.stats.count_masses import Ends, Hazards, MidpointGrid
from reliability.stats.count_positions import Rows

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class Block:
    """Rows that share a kind of grid.

    taken_share: share of the other removals that is not counted among the parts used.
    """

    grid: MidpointGrid | VisitGrid
    rows: Rows
    taken_share: float = 0.0

    def places(self, spans: FloatArray) -> list[tuple[IntArray, IntArray]]:
        """(begin, end) places of each target, for each class; spans are shares of the horizon, (targets, 2)."""
        classes = self.rows.classes
        return [(self._place(begin * classes.horizon), self._place(end * classes.horizon)) for begin, end in spans]

    def _place(self, time: FloatArray) -> IntArray:
        place = self.grid.place_of(np.minimum(time, self.rows.classes.leave_at), self.rows.classes)
        if isinstance(self.grid, MidpointGrid):
            # whole cells, so that no mass lies on an edge
            return 2 * np.rint(place / 2.0).astype(np.int64)
        return place.astype(np.int64)


class BlockTails:
    """Masses and kernels of one block for some draws; `targets` gives the tails of one kind of end."""

    def __init__(
        self,
        block: Block,
        spans: FloatArray,
        hazards: Hazards,
        fitted: Hazards,
        following: Hazards | None,
        duty: FloatArray,
    ) -> None:
        self._block, self._rows, self._grid = block, block.rows, block.grid
        on_lattice = isinstance(block.grid, VisitGrid)
        self._transform = Transform(block.grid.places, 0.0 if on_lattice else 0.5)
        self._distinct, which = block.rows.classes.distinct_from_new()
        self._classes = block.rows.classes.take(self._distinct)
        self._class_index = which[block.rows.class_index]
        own = duty[:, self._distinct]
        self._new, self._new_by = block.grid.new(fitted.take(self._distinct), self._classes, own)
        later = None if following is None else following.take(self._distinct)
        self._next = None if later is None else block.grid.new(later, self._classes, own)
        self._failures: list[FloatArray] = []
        self._running = np.flatnonzero(np.isnan(block.rows.start) | on_lattice)
        self._fresh = np.flatnonzero(~np.isnan(block.rows.start) & (not on_lattice))
        running = block.grid.running(hazards, block.rows, self._running, duty)
        self._ends, self._planned, self._planned_place = running
        self._spans = self._places(spans)

    def within(self, spans: FloatArray, draws: IntArray) -> BlockTails:
        """The same lives of some of the draws, for other spans."""
        other = copy(self)
        other._new, other._new_by, other._ends = (
            ends.of_draws(draws) for ends in (self._new, self._new_by, self._ends)
        )
        if self._next is not None:
            other._next = self._next[0].of_draws(draws), self._next[1].of_draws(draws)
        if self._planned is not None and self._planned_place is not None:
            other._planned, other._planned_place = self._planned[draws], self._planned_place[draws]
        other._failures, other._spans = [], self._places(spans)
        return other

    def _places(self, spans: FloatArray) -> list[tuple[IntArray, IntArray]]:
        return [(begin[self._distinct], end[self._distinct]) for begin, end in self._block.places(spans)]

    def targets(self, kind: str) -> list[FloatArray]:
        """Tails P(N >= k), k = 1 .., (draws, rows, orders), of each target."""
        if kind == "planned" and not self._any_planned and not (self._rows.extra == 2).any():
            return [np.zeros((self._new.failed.shape[0], len(self._rows), 1)) for _ in self._spans]
        if kind == "parts" and self._failures and self._ends.removed is None and not self._any_planned:
            # only what stopped modules get comes on top
            return [self._with_extra(kind, tails, number) for number, tails in enumerate(self._failures)]
        kernel = self._kernel(self._new, self._new_by, kind)
        whole = kernel.tails()
        following = None if self._next is None else self._kernel(*self._next, kind)
        if following is not None and (self._classes.switch_at <= 0).all():
            # every part fitted from now on is of the next design: nothing to switch within the horizon
            kernel, whole, following = following, following.tails(), None
        known: dict[int, FloatArray] = {}
        found = []
        for begin, end in self._spans:
            if following is not None:
                remaining = self._switched(kernel, whole, following, begin, end)
            else:
                remaining = self._windowed(kernel, whole, begin, end, known)
            found.append(remaining)
        tails = self._rows_tails(kind, found)
        if kind == "failures":
            self._failures = tails
        return [self._with_extra(kind, each, number) for number, each in enumerate(tails)]

    @property
    def _any_planned(self) -> bool:
        return self._planned is not None or self._ends.planned is not None or self._new.planned is not None

    def _kernel(self, masses: Ends, shares: Ends, kind: str) -> FromNew:
        counted_by = shares.split(kind, self._block.taken_share)[0]
        return FromNew(self._transform, *masses.split(kind, self._block.taken_share), counted_by)

    def _widths(self, begin: IntArray, end: IntArray) -> IntArray:
        """Window widths; a window from the start may reach as far back as the grid."""
        return np.where(begin == 0, self._grid.places, end - begin)

    def _windowed(
        self, kernel: FromNew, whole: FloatArray, begin: IntArray, end: IntArray, known: dict[int, FloatArray]
    ) -> FloatArray:
        widths = self._widths(begin, end)
        for width in np.unique(widths).tolist():
            if width not in known:
                known[width] = whole if width >= self._grid.places else kernel.window_tails(whole, width)
        return _by_class(known, widths)

    def _switched(
        self, kernel: FromNew, whole: FloatArray, following: FromNew, begin: IntArray, end: IntArray
    ) -> FloatArray:
        """Remaining tails where parts fitted after the switch live by the next design."""
        classes = self._classes
        switch = np.rint(self._grid.place_of(np.minimum(classes.switch_at, classes.horizon), classes))
        next_whole = following.tails()
        orders = max(whole.shape[2], next_whole.shape[2]) + 1
        reference = np.zeros((*whole.shape[:2], orders, whole.shape[3]))
        mixed = np.zeros_like(reference)
        settings = np.stack([self._widths(begin, end), end - switch.astype(np.int64)])
        for width, until in np.unique(settings, axis=1).T.tolist():
            same = (settings[0] == width) & (settings[1] == until)
            window = next_whole if width >= whole.shape[3] else following.window_tails(next_whole, width)
            mixed[:, same] = kernel.staged_tails(reference, width, window, until)[:, same]
        return mixed

    def _rows_tails(self, kind: str, remaining: list[FloatArray]) -> list[FloatArray]:
        """Tails of all rows: running parts by one product for all targets, then the others.

        An end in a cell is followed by what remains, one order less where it is counted inside the target: a product
        over all cells, and one over those few inside.
        """
        counted, silent = self._ends.split(kind, self._block.taken_share)
        ends = counted if silent is None else counted + silent
        edges = np.cumsum([0, *(found.shape[2] - 1 for found in remaining)])
        beyond = np.zeros((counted.shape[0], len(self._classes), counted.shape[2], edges[-1]))
        inside = [
            self._follow(found, number, beyond[..., edges[number] : edges[number + 1]])
            for number, found in enumerate(remaining)
        ]
        products = self._by_class_product(ends, beyond)
        tails = []
        for number, found in enumerate(remaining):
            cells, follow = inside[number]
            own = products[..., edges[number] : edges[number + 1]]
            if cells.size:
                own = own + self._by_class_product(counted[..., cells], follow)
            rows = np.zeros((own.shape[0], len(self._rows), own.shape[2]))
            rows[:, self._running] = own
            if self._planned is not None:
                rows[:, self._running] += self._planned_part(kind, found, number)
            if self._fresh.size:
                place = self._start_place(self._fresh)
                rows[:, self._fresh] = self._read(found, self._fresh, self._spans[number][1], place)[..., 1:]
            tails.append(rows)
        return tails

    def _follow(self, remaining: FloatArray, number: int, beyond: FloatArray) -> tuple[IntArray, FloatArray]:
        """Fills `beyond` (draws, classes, cells, orders - 1) with what follows an end that is not counted.

        Returns the cells in which ends count, and what these add: (draws, classes, those cells, orders - 1).
        """
        begin, end = self._spans[number]
        at = self._grid.at
        spans = np.stack([self._widths(begin, end), end])
        settings = np.unique(spans[:, end > begin], axis=1).T.tolist()
        counting = [self._transform.up_to(width) for width, _ in settings]
        reach = np.zeros(at.size, dtype=bool)
        for (_, stop), share in zip(settings, counting, strict=True):
            reach |= (stop >= at) & (share[np.maximum(stop - at, 0)] > 0)
        inside = np.flatnonzero(reach)
        more = np.zeros((*beyond.shape[:2], inside.size, beyond.shape[3]))
        for (width, stop), share in zip(settings, counting, strict=True):
            alike = np.flatnonzero((spans[0] == width) & (spans[1] == stop) & (end > begin))
            same: IntArray | slice = slice(None) if alike.size == len(self._classes) else alike
            cells = int(np.count_nonzero(at <= stop))  # places rise: the first ones
            reached = remaining[:, same][..., stop - at[:cells]].swapaxes(2, 3)
            beyond[:, same, :cells] = reached[..., 1:]
            few = inside[inside < cells]
            near = reached[:, :, few]
            more[:, same, : few.size] = (near[..., :-1] - near[..., 1:]) * share[stop - at[few]][:, None]
        return inside, more

    def _by_class_product(self, masses: FloatArray, follow: FloatArray) -> FloatArray:
        """masses (draws, rows, cells) times follow (draws, classes, cells, columns) of each row's class."""
        index = self._class_index[self._running]
        if (np.diff(index) < 0).any():
            order = np.argsort(index, kind="stable")
            product = np.empty((*masses.shape[:2], follow.shape[3]))
            product[:, order] = self._sorted_product(masses[:, order], follow, index[order])
            return product
        return self._sorted_product(masses, follow, index)

    def _sorted_product(self, masses: FloatArray, follow: FloatArray, index: IntArray) -> FloatArray:
        classes = follow.shape[1]
        counts = np.bincount(index, minlength=classes)
        most = int(counts.max(initial=0))
        if classes == 1:
            return masses @ follow[:, 0]
        if classes * most <= 3 * index.size:
            slot = np.arange(index.size) - np.repeat(np.cumsum(counts) - counts, counts)
            padded = np.zeros((masses.shape[0], classes, most, masses.shape[2]))
            padded[:, index, slot] = masses
            return (padded @ follow)[:, index, slot]
        product = np.empty((*masses.shape[:2], follow.shape[3]))
        edges = np.concatenate([[0], np.cumsum(counts)])
        for number in np.flatnonzero(counts):
            mine = slice(edges[number], edges[number + 1])
            product[:, mine] = masses[:, mine] @ follow[:, number]
        return product

    def _planned_part(self, kind: str, remaining: FloatArray, number: int) -> FloatArray:
        """What follows the planned replacement of the running part, weighted by its chance."""
        begin, end = (edge[self._class_index[self._running]] for edge in self._spans[number])
        read = self._read(remaining, self._running, self._spans[number][1], self._planned_place)
        left = end - self._planned_place
        inside = (left <= self._widths(begin, end))[..., None] & (kind != "failures")
        return np.where(inside, read[..., :-1], read[..., 1:]) * self._planned[..., None]

    def _read(self, remaining: FloatArray, rows: IntArray, end: IntArray, start: FloatArray) -> FloatArray:
        """remaining at real places end - start, 0 before the start: start (rows,) or (draws, rows)."""
        which = self._class_index[rows]
        place = np.broadcast_to(end[which] - start, (remaining.shape[0], rows.size))
        inside = np.clip(place, 0.0, remaining.shape[3] - 1.0)
        left = np.minimum(np.floor(inside).astype(np.int64), remaining.shape[3] - 2)
        share = (inside - left)[..., None]
        draw = np.arange(remaining.shape[0])[:, None]
        value = remaining[draw, which, :, left] * (1.0 - share) + remaining[draw, which, :, left + 1] * share
        return value * (place >= 0)[..., None]

    def _start_place(self, rows: IntArray) -> FloatArray:
        start = np.nan_to_num(self._rows.start[rows])
        return self._grid.place_of(start, self._rows.classes.take(self._rows.class_index[rows]))

    def _with_extra(self, kind: str, tails: FloatArray, number: int) -> FloatArray:
        """Parts used by putting a stopped module right, and by overdue replacements, come on top."""
        relevant = self._rows.extra == 2 if kind == "planned" else self._rows.extra > 0
        if kind == "failures" or not relevant.any():
            return tails
        place = self._start_place(np.arange(len(self._rows)))
        low, high = (edge[self._class_index] for edge in self._spans[number])
        used = relevant & (place <= high) & ((place > low) | (low == 0)) & (high > 0)
        longer = np.concatenate([tails, np.zeros_like(tails[..., :1])], axis=2)
        longer[:, used, 1:] = tails[:, used]
        longer[:, used, 0] = 1.0
        return longer


def _by_class(known: dict[int, FloatArray], widths: IntArray) -> FloatArray:
    """The remaining tails of each class for its own window width."""
    distinct = np.unique(widths).tolist()
    if len(distinct) == 1:
        return known[distinct[0]]
    orders = max(known[width].shape[2] for width in distinct)
    first = known[distinct[0]]
    merged = np.zeros((*first.shape[:2], orders, first.shape[3]))
    for width in distinct:
        same = widths == width
        merged[:, same, : known[width].shape[2]] = known[width][:, same]
    return merged
