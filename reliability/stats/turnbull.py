"""Survival curve from interval-censored lives: Turnbull's non-parametric maximum-likelihood estimate."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import ArrayLike

from reliability.stats.errors import InvalidArgument, NotConverged, UndefinedEstimate
from reliability.stats.lifetimes import BoolArray, FloatArray, IntArray, Lifetimes

# at one age the order is: exact failure begins, any interval ends, an open interval begins
EXACT_BEGINS, ENDS, OPEN_BEGINS = 0, 1, 2
SELF_CONSISTENCY_STEPS = 20_000
MASS_STEPS = 200
# the Newton steps need a matrix of cells by cells
MOST_CELLS_FOR_NEWTON = 1500
# how far the likelihood's slope may point outside, relative to the number of lives
SLOPE_ENOUGH = 1e-10
CHANGE_ENOUGH = 1e-12
# heavy weights leave rounding above that: then no progress for this many steps, once the change is small, will do
ROUNDING_CHANGE, STEPS_WITHOUT_PROGRESS = 1e-9, 40


@dataclass(frozen=True, eq=False)
class TurnbullCurve:
    """Where the estimate puts failures: mass[j] somewhere in (left[j], right[j]], or at right[j] where they are equal.

    left, right, mass, survival: shape (m,), rising ages; survival[j] is S at right[j]. Inside an interval the data do
    not say where the mass lies; what lies beyond the last one is 1 - sum(mass). given_survival_to: the first age
    under observation (0 from new).
    """

    left: FloatArray
    right: FloatArray
    mass: FloatArray
    survival: FloatArray
    log_likelihood: float
    iterations: int
    given_survival_to: float
    last_age: float

    @property
    def times(self) -> FloatArray:
        """The ages at which the curve is known to have stepped down, shape (m,)."""
        return self.right

    def survival_at(self, ages: ArrayLike) -> FloatArray:
        """S at the ages, the mass of an interval counted at its right end; shape as given."""
        return self.bounds_at(ages)[1]

    def bounds_at(self, ages: ArrayLike) -> tuple[FloatArray, FloatArray]:
        """Least and greatest S at the ages; they differ inside the intervals. InvalidArgument outside the data."""
        ages = np.asarray(ages, dtype=float)
        outside = ~((ages >= self.given_survival_to) & (ages <= self.last_age))
        if outside.any():
            raise InvalidArgument(
                f"The curve is known from age {self.given_survival_to:g} to {self.last_age:g}; "
                f"age {ages[outside].ravel()[0]:g} lies outside."
            )
        levels = np.append(1.0, self.survival)
        stepped = np.searchsorted(self.right, ages, side="right")
        begun = np.maximum(np.searchsorted(self.left, ages, side="left"), stepped)
        return levels[begun], levels[stepped]

    def quantile(self, probability: float) -> tuple[float, float] | None:
        """The interval (left, right] within which the share `probability` is reached; None where it is not."""
        if not 0.0 < probability < 1.0:
            raise InvalidArgument(f"The share failed is {probability:g}; it must lie between 0 and 1.")
        reached = self.survival <= 1.0 - probability + 1e-10
        if not reached.any():
            return None
        step = int(np.argmax(reached))
        return float(self.left[step]), float(self.right[step])


@dataclass(frozen=True, eq=False)
class _Cells:
    """Innermost intervals in rising order, and which of them each row may have failed in."""

    left: FloatArray  # (m,)
    right: FloatArray  # (m,), inf for beyond all ages
    first: IntArray  # first cell of each row, (n,)
    last: IntArray  # one past its last cell, (n,)
    entry: IntArray  # number of cells before the row came under observation, (n,)
    weights: FloatArray  # (n,)

    @cached_property
    def one_cell(self) -> BoolArray:
        """Rows that say in which cell they failed, (n,)."""
        return (self.last - self.first == 1) & ~self.beyond

    @cached_property
    def beyond(self) -> BoolArray:
        """Rows that may have outlasted all ages, (n,)."""
        return self.right[self.last - 1] == np.inf

    @cached_property
    def known_failed(self) -> FloatArray:
        """Lives of which the cell is known, (m,)."""
        return np.bincount(self.first[self.one_cell], weights=self.weights[self.one_cell], minlength=self.right.size)

    @cached_property
    def known_at_risk(self) -> FloatArray:
        """Lives at risk in each cell whatever the masses: before all cells in which they may have failed, (m,)."""
        return _running(self.entry, self.first, self.weights, self.right.size) + self.known_failed

    @cached_property
    def spread_rows(self) -> tuple[IntArray, IntArray, FloatArray, IntArray]:
        """First, last, weights and spans of the rows whose cell among several depends on the masses."""
        several = ~self.one_cell & ~self.beyond
        first, last = self.first[several], self.last[several]
        return first, last, self.weights[several], _spans(first, last)


def turnbull(lifetimes: Lifetimes) -> TurnbullCurve:
    """Non-parametric maximum likelihood for any mix of exact, withdrawn, interval and late-entered rows.

    Intervals are half open, (last_good, duration]; a withdrawn row failed after its duration. Mass can lie only in the
    innermost intervals (those that begin and end without another beginning or ending inside). Each part inspected once
    (current status) is solved exactly by isotonic regression; otherwise Newton steps on the masses until the likelihood
    has no slope left, or with late entry the self-consistent hazards.

    Turnbull, J. Royal Statistical Society B 38 (1976) 290-295; Ayer et al., Annals of Math. Statistics 26 (1955)
    641-647; late entry: Frydman, J. Royal Statistical Society B 56 (1994) 71-74. Raises UndefinedEstimate where all
    parts under observation at some age are taken to have failed before others came under observation.
    """
    cells = _innermost_cells(lifetimes)
    if _inspected_once(lifetimes):
        mass, iterations = _isotonic(lifetimes, cells), 1
    elif lifetimes.has_entries or not lifetimes.has_intervals or cells.right.size > MOST_CELLS_FOR_NEWTON:
        mass, iterations = _self_consistent(cells)
    else:
        mass, iterations = _newton_masses(cells)
    return _curve(lifetimes, cells, mass, iterations)


def _curve(lifetimes: Lifetimes, cells: _Cells, mass: FloatArray, iterations: int) -> TurnbullCurve:
    survival = np.maximum(1.0 - np.cumsum(mass), 0.0)
    if np.isfinite(cells.right[-1]):
        survival[-1] = 0.0
    kept = np.isfinite(cells.right) & (mass > 1e-13)
    summed = np.append(0.0, np.cumsum(mass))
    inside = summed[cells.last] - summed[cells.first]
    after = 1.0 - summed[cells.entry]
    log_likelihood = float(cells.weights @ (np.log(np.maximum(inside, 1e-300)) - np.log(np.maximum(after, 1e-300))))
    return TurnbullCurve(
        left=cells.left[kept],
        right=cells.right[kept],
        mass=mass[kept],
        survival=survival[kept],
        log_likelihood=log_likelihood,
        iterations=iterations,
        given_survival_to=float(lifetimes.entries.min()),
        last_age=float(lifetimes.durations.max()),
    )


def _innermost_cells(lifetimes: Lifetimes) -> _Cells:
    grouped = lifetimes.grouped()
    exact, interval = grouped.is_exact, grouped.is_interval
    begins = np.where(interval, grouped.last_good, grouped.durations)
    begin_kind = np.where(exact, EXACT_BEGINS, OPEN_BEGINS)
    ends = np.where(grouped.observed, grouped.durations, np.inf)
    # what failed before a part came under observation lies outside its condition: its entry can end a cell
    late = grouped.entries[grouped.entries > 0]
    ages, places = np.unique(np.concatenate([begins, ends, grouped.entries]), return_inverse=True)
    count = len(grouped)
    begin_key = places[:count] * 3 + begin_kind
    end_key = places[count : 2 * count] * 3 + ENDS
    late_key = np.searchsorted(ages, late) * 3 + ENDS
    keys = np.unique(np.concatenate([begin_key, end_key, late_key]))
    is_begin = keys % 3 != ENDS
    inner = np.flatnonzero(is_begin[:-1] & ~is_begin[1:])
    left_keys, right_keys = keys[inner], keys[inner + 1]
    entry_key = places[2 * count :] * 3 + OPEN_BEGINS
    return _Cells(
        left=ages[left_keys // 3],
        right=ages[right_keys // 3],
        first=np.searchsorted(left_keys, begin_key, side="left"),
        last=np.searchsorted(right_keys, end_key, side="right"),
        entry=np.searchsorted(left_keys, entry_key, side="left"),
        weights=grouped.weights,
    )


def _inspected_once(lifetimes: Lifetimes) -> bool:
    return not lifetimes.has_entries and bool((lifetimes.last_good[lifetimes.observed] == 0.0).all())


def _isotonic(lifetimes: Lifetimes, cells: _Cells) -> FloatArray:
    """Masses from the weighted isotonic regression of the share found failed on the age of inspection."""
    ages, place = np.unique(lifetimes.durations, return_inverse=True)
    inspected = np.bincount(place, weights=lifetimes.weights)
    found = np.bincount(place, weights=lifetimes.weights * lifetimes.observed)
    shares = pool_adjacent_violators(found / inspected, inspected)
    levels = np.append(0.0, shares)

    def failed_by(at: FloatArray) -> FloatArray:
        return np.where(np.isinf(at), 1.0, levels[np.searchsorted(ages, at, side="right")])

    return failed_by(cells.right) - failed_by(cells.left)


def pool_adjacent_violators(values: FloatArray, weights: FloatArray) -> FloatArray:
    """The rising sequence closest to the values in weighted least squares, shape as given."""
    means: list[float] = []
    sizes: list[float] = []
    lengths: list[int] = []
    for value, weight in zip(values.tolist(), weights.tolist(), strict=True):
        means.append(value)
        sizes.append(weight)
        lengths.append(1)
        while len(means) > 1 and means[-2] >= means[-1]:
            size = sizes[-2] + sizes[-1]
            means[-2:] = [(means[-2] * sizes[-2] + means[-1] * sizes[-1]) / size]
            sizes[-2:] = [size]
            lengths[-2:] = [lengths[-2] + lengths[-1]]
    return np.repeat(means, lengths)


def _chances(cells: _Cells, mass: FloatArray) -> FloatArray:
    """Probability of each row, the sum of the masses it covers, shape (n,)."""
    return _sums_between(_spans(cells.first, cells.last), mass)


def _spans(first: IntArray, last: IntArray) -> IntArray:
    """First and last of each row by turns, (2 n,)."""
    return np.stack([first, last], axis=1).ravel()


def _sums_between(spans: IntArray, mass: FloatArray) -> FloatArray:
    """Sum of the masses from each first up to before each last, shape (n,)."""
    return np.add.reduceat(np.append(mass, 0.0), spans)[::2] if spans.size else np.zeros(0)


def _spread_over_cells(cells: _Cells, values: FloatArray) -> FloatArray:
    """Sum of the rows' values over the rows that cover each cell, shape (m,)."""
    return _running(cells.first, cells.last, values, cells.right.size)


def _newton_masses(cells: _Cells) -> tuple[FloatArray, int]:
    """Masses that maximise sum of weight log(chance), by projected Newton steps.

    The multiplier of sum(mass) = 1 is the number of lives, so that the sum needs no constraint: maximise
    sum weight log(chance) - lives sum(mass) over masses >= 0 (Bertsekas, SIAM J. Control 20 (1982) 221-246).
    """
    lives = float(cells.weights.sum())
    mass = np.full(cells.right.size, 1.0 / cells.right.size)
    for _ in range(30):
        mass = mass * _spread_over_cells(cells, cells.weights / _chances(cells, mass)) / lives
    for iteration in range(1, MASS_STEPS + 1):
        chances = _chances(cells, mass)
        slope = _spread_over_cells(cells, cells.weights / chances) - lives
        if max(float(slope.max()), float((mass * np.abs(slope)).max())) <= SLOPE_ENOUGH * lives:
            return _cleaned(mass), iteration
        free = (mass > 1e-9) | (slope > 0.0)
        mass = _stepped(cells, mass, slope, free, chances, lives)
    raise NotConverged(
        f"The non-parametric estimate did not settle in {MASS_STEPS} steps. Group the ages more coarsely.",
        iterations=MASS_STEPS,
    )


def _cleaned(mass: FloatArray) -> FloatArray:
    mass = np.where(mass > 1e-11, mass, 0.0)
    return mass / mass.sum()


def _stepped(
    cells: _Cells, mass: FloatArray, slope: FloatArray, free: BoolArray, chances: FloatArray, lives: float
) -> FloatArray:
    """One projected Newton step that climbs; then a self-consistent step, which never falls."""
    direction = np.where(mass > 1e-9, 0.0, -mass)
    direction[free] = _newton_direction(cells, cells.weights / chances**2, slope, free, 1e-12 * lives)
    height = float(cells.weights @ np.log(chances)) - lives * float(mass.sum())
    share = 1.0
    for _ in range(50):
        candidate = np.maximum(mass + share * direction, 0.0)
        reached = _chances(cells, candidate)
        if (reached > 0.0).all():
            new_height = float(cells.weights @ np.log(reached)) - lives * float(candidate.sum())
            if new_height >= height:
                mass = candidate
                break
        share *= 0.5
    return mass * _spread_over_cells(cells, cells.weights / _chances(cells, mass)) / lives


def _newton_direction(
    cells: _Cells, values: FloatArray, slope: FloatArray, free: BoolArray, ridge: float
) -> FloatArray:
    """Solves curvature x = slope on the free cells, shape (their number,), the curvature's diagonal a little raised.

    The curvature of cells j and k is the sum of the values of the rows that cover both, a full matrix. In running sums
    y, x_j = y_j - y_(j-1), a row concerns its two ends only: that matrix has as many entries as rows.
    """
    from scipy import sparse
    from scipy.sparse.linalg import splu

    before = np.append(0, np.cumsum(free))
    size = int(before[-1])
    # number of the sum at each row's beginning and end; sum 0 is none and always 0
    first, last = before[cells.first], before[cells.last]
    diagonal = _spread_over_cells(cells, values)[free]
    own = np.arange(1, size + 1)
    begins, ends = np.concatenate([first, own - 1]), np.concatenate([last, own])
    weights = np.concatenate([values, ridge + 1e-10 * diagonal])
    entries = np.concatenate([weights, weights, -weights, -weights])
    down, across = np.concatenate([begins, ends, begins, ends]), np.concatenate([begins, ends, ends, begins])
    kept = (down > 0) & (across > 0)
    matrix = sparse.csc_matrix((entries[kept], (down[kept] - 1, across[kept] - 1)), shape=(size, size))
    steps = slope[free]
    sums = splu(matrix).solve(steps - np.append(steps[1:], 0.0))
    return np.diff(sums, prepend=0.0)


def _self_consistent(cells: _Cells) -> tuple[FloatArray, int]:
    """Masses from hazards that reproduce themselves: expected failures over expected numbers at risk in each cell."""
    size = cells.right.size
    # even masses to begin with: the last hazard is 1
    hazard = _reproduced(cells, 1.0 / np.arange(size, 0, -1))
    iteration, settled, smallest, since = 0, False, np.inf, 0
    while not settled:
        iteration += 1
        once = _reproduced(cells, hazard)
        twice = _reproduced(cells, once)
        change, bend = once - hazard, twice - 2.0 * once + hazard
        largest = float(np.abs(change).max())
        smallest, since = (largest, 0) if largest < 0.5 * smallest else (smallest, since + 1)
        settled = largest <= CHANGE_ENOUGH or (smallest <= ROUNDING_CHANGE and since >= STEPS_WITHOUT_PROGRESS)
        # squared extrapolation (Varadhan & Roland, Scandinavian J. Statistics 35 (2008) 335-353)
        length = float(np.linalg.norm(change)) / max(float(np.linalg.norm(bend)), 1e-12)
        far = hazard + 2.0 * length * change + length * length * bend
        usable = length > 1.0 and bool(((far >= 0.0) & (far <= 1.0)).all())
        hazard = _reproduced(cells, far) if usable and not settled else twice
        if iteration >= SELF_CONSISTENCY_STEPS:
            raise NotConverged(
                f"The non-parametric estimate did not settle in {iteration} steps. Group the ages more coarsely.",
                iterations=iteration,
            )
    return _masses(cells, hazard), iteration


def _masses(cells: _Cells, hazard: FloatArray) -> FloatArray:
    """Mass of each cell. Raises UndefinedEstimate where S falls to 0 before others came under observation."""
    survival = np.ones(hazard.size + 1)
    np.cumprod(1.0 - hazard, out=survival[1:])
    emptied = np.flatnonzero(survival[1:] < 1e-12)
    if emptied.size and (cells.entry > emptied[0]).any():
        age = float(cells.right[emptied[0]])
        raise UndefinedEstimate(
            f"By age {age:g} all parts then under observation have failed, and others came under observation only "
            "later: nothing links the two. Leave out the lives that ended so early, and speak of survival given "
            "that age."
        )
    return survival[:-1] * hazard


def _reproduced(cells: _Cells, hazard: FloatArray) -> FloatArray:
    """One step of self-consistency; a withdrawn row is at risk up to the cells in which it may have failed."""
    size = hazard.size
    mass = _masses(cells, hazard)
    first, last, weights, spans = cells.spread_rows
    summed = np.zeros(size + 1)
    np.cumsum(mass, out=summed[1:])
    share = weights / np.maximum(_sums_between(spans, mass), 1e-300)
    covering = _running(first, last, share, size)
    failed = mass * covering
    # still at risk in a cell: the share of the row's chance that lies in it or in later cells
    after = np.maximum(_running(first, last, share * summed[last], size) - summed[:-1] * covering, failed)
    at_risk, failed = cells.known_at_risk + after, cells.known_failed + failed
    reproduced = np.where(at_risk > 0.0, np.minimum(failed / np.maximum(at_risk, 1e-300), 1.0), 0.0)
    if np.isinf(cells.right[-1]):
        reproduced[-1] = 1.0  # what outlasts all ages fails beyond them; none was counted there
    return reproduced


def _running(first: IntArray, last: IntArray, values: FloatArray, size: int) -> FloatArray:
    """Sum of the values of the rows that cover each cell from first up to before last, shape (size,)."""
    steps = np.bincount(first, weights=values, minlength=size + 1)
    steps -= np.bincount(last, weights=values, minlength=size + 1)
    return np.cumsum(steps)[:-1]
