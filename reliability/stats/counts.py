"""How many failures, and parts used, a horizon will bring: the delayed renewal count averaged over posterior draws.

For given parameters the failures N of a position whose part has the age a obey P(N >= 1) = F(H | a) and
P(N >= k) = int f(u | a) F^(k-1)*(H - u) du (Cox 1962, Renewal Theory, ch. 2 and 3), with removals for other reasons
as a competing way to end. A sum over positions has the product of their generating functions, exact given the
parameters; the forecast is its average over draws of the posterior.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from itertools import pairwise
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import ndtri

from reliability.stats.count_designs import DesignDraws, Posterior, Roles, roles_of
from reliability.stats.count_groups import Block, BlockTails
from reliability.stats.count_lattice import VisitGrid
from reliability.stats.count_masses import MidpointGrid
from reliability.stats.count_positions import Rows, group_positions
from reliability.stats.count_results import CountDistribution, CountForecast, Counts
from reliability.stats.count_tallies import Plan, Tallies
from reliability.stats.count_thinning import expected_by_site, shapes_and_scales, spoken_for
from reliability.stats.errors import InvalidArgument
from reliability.stats.prediction import calibrated_prediction

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

__all__ = ["CountDistribution", "CountForecast", "Counts", "calibrated_prediction", "forecast_counts"]

LEAST_CELLS = 12
MOST_CELLS = 512
CELLS_A_SPREAD = 2.5  # cells within scale / shape; with twice as many no quantile moves
CELLS_WITH_CHANGES = 5.0  # where positions leave, or designs change, between cells
FEW_ROWS = 40
WINDOW_DRAWS = 20  # tell what a single window brings
MANY_DRAWS = 50  # unless more than so many are needed for the whole: then little is known, and each counts
MANY_CELLS = 190.0
_RARE_HAZARD = 0.25


def forecast_counts(
    posterior: Posterior | Mapping[Any, Posterior],
    ages: ArrayLike,
    horizons: ArrayLike,
    *,
    sites: Sequence[Any] | None = None,
    groups: Sequence[Any] | None = None,
    windows: Sequence[float] | None = None,
    weights: ArrayLike | None = None,
    draws: int = 400,
    counted_draws: int | None = None,
    rng: np.random.Generator | None = None,
    replace_at: ArrayLike | None = None,
    visits: tuple[ArrayLike, ArrayLike] | None = None,
    other_removals: ArrayLike = 0.0,
    duty_spread: float | tuple[float, float] = 0.0,
    down_until: ArrayLike = 0.0,
    leave_at: ArrayLike | None = None,
    next_posterior: Posterior | None = None,
    switch_at: ArrayLike | None = None,
    refit_delay: float = 0.0,
    cells: int | None = None,
    group_window: int | None = None,
    also_groups: Sequence[Sequence[Any]] = (),
    stretch: tuple[int, int] | None = None,
    parts_by_window: bool = True,
    taken_share: float = 0.0,
    join_at: ArrayLike = 0.0,
    oldest: ArrayLike = 0.0,
    designs: Sequence[Any] | None = None,
    next_designs: Sequence[Any] | None = None,
    later_designs: Sequence[Any] | None = None,
) -> CountForecast:
    """Distribution of failures and parts used by positions within their horizons.

    Times are in the unit of the lives; figures are scalars or one a position (n,).
    ages: of the parts running now. horizons: how long each position is counted. weights: equal positions a row.
    sites, groups: labels; sites choose the site factors of a posterior with spread (labels without history draw from
    it).
    windows: increasing edges from 0, on any scale; the last one is the end of every horizon (0, 7, 14 ... 91 for
    weeks).
    replace_at: planned replacement at that age. visits: (interval, time to the next one); failures are found and parts
    replaced only then, and a running part was good at the last visit. other_removals: rate of removals for other
    reasons per unit of horizon. duty_spread: standard deviation of log duty over the horizon, common to all, or
    (common, a site's).
    down_until: above 0 the module is stopped and gets a new part then. leave_at: the position is counted until then.
    next_posterior, switch_at: parts fitted after switch_at live by next_posterior.
    refit_delay: from a failure to the moment the new part's life begins; half a day where failures are written down by
    the day and parts begin with the next. draws: of the posterior; counted_draws: so
    many of them are counted in full, weighted to speak for all (see count_thinning; None: every one).
    cells: steps of the grid (chosen from the lives if None).
    group_window: by_group speaks of this window (0 the first) instead of the whole horizon.
    also_groups: further labels of every position, answered in by_also. stretch: (first, last) edge of windows; totals,
    groups and windows speak of what lies between them, in one pass. parts_by_window: False leaves the windows'
    parts_used at failures.
    taken_share: share of the other removals that parts_used leaves out, because they are counted elsewhere.
    join_at: the position is there, and its part ages, only from then on.
    oldest: above the age: that is the least the running part can be, and it may be up to so old (see unknown_ages); not
    with replace_at.
    designs, next_designs, later_designs: with one posterior a design (a mapping), the label of the design that runs at
    each position, is fitted there from now on, and after switch_at; all designs' draws, sites and duty belong together.
    Raises InvalidArgument. Source: Cox 1962; early renewals by mass at cell midpoints, see count_kernel.
    """
    rng = np.random.default_rng() if rng is None else rng
    edges = _window_edges(windows)
    leave: ArrayLike = np.inf if leave_at is None else leave_at
    if windows is None and leave_at is not None:
        # without windows leaving only shortens the horizon, exactly
        horizons, leave = np.minimum(np.asarray(horizons, dtype=np.float64), leave), np.inf
    later = next_posterior if later_designs is None else later_designs
    roles = roles_of(posterior, designs, next_designs, later, switch_at is not None)
    needs_sites = _needs_sites(roles, duty_spread, sites, ages)
    labels = _label_tuples(groups, also_groups) if also_groups else groups
    rows = group_positions(
        ages,
        horizons,
        sites=sites if needs_sites else None,
        groups=labels,
        weights=weights,
        columns={
            "down_until": down_until,
            "leave_at": leave,
            "visit_every": 0.0 if visits is None else visits[0],
            "visit_next": 0.0 if visits is None else visits[1],
            "replace_at": np.inf if replace_at is None else replace_at,
            "other_removals": other_removals,
            "switch_at": np.inf if switch_at is None else switch_at,
            "join_at": join_at,
            "oldest": oldest,
        },
        designs=(roles.running, roles.fitted, roles.fitted if roles.later is None else roles.later),
    )
    if not refit_delay >= 0:
        raise InvalidArgument(f"refit_delay is {refit_delay:g}; it must be at least 0.")
    drawn = DesignDraws.drawn(roles.posteriors, draws, rng, rows.site_labels)
    duty = _duty_factors(duty_spread, draws, len(rows.site_labels), rng)
    sharpness = _cells_a_time(rows) * drawn.sharpness(_used_designs(rows))
    if group_window is not None and not 0 <= group_window < len(edges) - 1:
        raise InvalidArgument(f"group_window is {group_window}; there are {len(edges) - 1} windows, counted from 0.")
    if not 0 <= taken_share <= 1:
        raise InvalidArgument(f"taken_share is {taken_share:g}; it must lie between 0 and 1.")
    whole, spans = _spans(edges, stretch)
    plan = Plan(
        grouped=0 if group_window is None else group_window + 1,
        groupings=1 + len(also_groups),
        windows=() if windows is None else _told_windows(windows, stretch),
        parts_by_window=parts_by_window,
    )
    tallies = Tallies(rows, plan)
    told = whole[None] if group_window is None else np.stack([whole, spans[group_window]])
    coarse = rows.coarse() if len(rows) > FEW_ROWS else rows
    coarse = coarse if len(coarse) < 0.7 * len(rows) else rows
    some, shares = np.arange(draws), np.ones(draws)
    if counted_draws is not None and counted_draws < draws and len(rows):
        expected, further = expected_by_site(rows, drawn, duty, whole), shapes_and_scales(drawn, _used_designs(rows))
        some, shares = spoken_for(expected, counted_draws, further=further)
    for places, share in _chunks(rows, sharpness[some], shares):
        chunk = some[places]
        chosen = coarse if _are_rare(rows, drawn, duty, chunk) else rows
        sharp = float(np.quantile(sharpness[chunk], 0.9))
        blocks = _blocks(chosen, sharp, edges, cells, (refit_delay, taken_share))
        if not blocks:
            tallies.add_nothing(chunk.size)
            continue
        lives = [_lives(block, told, drawn, roles.later is not None, duty, chunk) for block in blocks]
        weights = np.concatenate([block.rows.weights for block in blocks], axis=1)
        means = np.zeros(chunk.size)
        for kind in tallies.kinds:
            targets = _side_by_side(lives, kind)
            tallies.add(kind, targets, weights, share)
            means += targets[0].sum(axis=2) @ weights[-1] if kind == "failures" else 0.0
        if plan.windows:
            thinned = some.size < draws and some.size <= MANY_DRAWS
            few, stand_for = _representatives(means, share, some.size) if thinned else (np.arange(chunk.size), share)
            lives = [each.within(spans, few) for each in lives]
            for kind in tallies.window_kinds:
                tallies.add_windows(kind, _side_by_side(lives, kind), weights, stand_for)
    return tallies.forecast(rows, draws)


def _window_edges(windows: Sequence[float] | None) -> FloatArray:
    if windows is None:
        return np.array([1.0])
    edges = np.asarray(windows, dtype=np.float64)
    if edges.ndim != 1 or edges.size < 2 or edges[0] != 0 or not (np.diff(edges) > 0).all():
        raise InvalidArgument(
            "windows must be increasing edges that begin with 0; the last one is the end of the horizon."
        )
    return edges / edges[-1]


def _needs_sites(
    roles: Roles,
    duty_spread: float | tuple[float, float],
    sites: Sequence[Any] | None,
    ages: ArrayLike,
) -> bool:
    """Whether positions of different sites differ; sites that change nothing would only multiply the work."""
    if sites is not None and len(sites) != np.size(ages):
        raise InvalidArgument(f"sites holds {len(sites)} labels; there are {np.size(ages)} positions.")
    spread = roles.has_spread
    if spread and sites is None:
        raise InvalidArgument("This posterior has a spread between sites: give the site of every position.")
    return spread or isinstance(duty_spread, tuple)


def _duty_factors(spread: float | tuple[float, float], draws: int, sites: int, rng: np.random.Generator) -> FloatArray:
    """Lognormal factors of mean 1 on the horizon's use, (draws, sites); the common one and each site's stratified."""
    common, own = spread if isinstance(spread, tuple) else (spread, 0.0)
    if common < 0 or own < 0:
        raise InvalidArgument("duty_spread must be at least 0.")
    factors = np.ones((draws, sites))
    for deviation, columns in ((common, 1), (own, sites)):
        if deviation:
            places = rng.permuted(np.tile(np.arange(draws)[:, None], (1, columns)), axis=0)
            steps = ndtri((places + rng.random((draws, columns))) / draws)
            factors = factors * np.exp(deviation * steps - deviation**2 / 2.0)
    return factors


def _cells_a_time(rows: Rows) -> float:
    changes = np.isfinite(rows.classes.leave_at).any() or np.isfinite(rows.classes.switch_at).any()
    return CELLS_WITH_CHANGES if changes else CELLS_A_SPREAD


def _used_designs(rows: Rows) -> IntArray:
    classes = rows.classes
    used = np.unique(np.concatenate([classes.running, classes.fitted, classes.later]))
    return used if used.size else np.zeros(1, dtype=np.int64)


def _spans(edges: FloatArray, stretch: tuple[int, int] | None) -> tuple[FloatArray, FloatArray]:
    """(begin, end) of what is counted, as shares of the horizon: the whole (or the stretch) (2,), and its windows."""
    if edges.size == 1 and stretch is None:
        return np.array([0.0, 1.0]), np.zeros((0, 2))
    first, last = (0, edges.size - 1) if stretch is None else stretch
    if not 0 <= first < last <= edges.size - 1:
        raise InvalidArgument(f"stretch is {stretch}; it must name two edges of the windows, the first one first.")
    own = np.stack([edges[first:last], edges[first + 1 : last + 1]], axis=1)
    return np.array([edges[first], edges[last]]), own


def _told_windows(windows: Sequence[float], stretch: tuple[int, int] | None) -> tuple[tuple[float, float], ...]:
    told = tuple(pairwise(map(float, windows)))
    return told if stretch is None else told[stretch[0] : stretch[1]]


def _label_tuples(groups: Sequence[Any] | None, also: Sequence[Sequence[Any]]) -> list[tuple[Any, ...]]:
    if groups is None or any(len(labels) != len(groups) for labels in also):
        raise InvalidArgument("also_groups needs groups, with as many labels in each.")
    return list(zip(groups, *also, strict=True))


def _blocks(
    rows: Rows,
    sharpness: float,
    edges: FloatArray,
    cells: int | None,
    settings: tuple[float, float],
) -> list[Block]:
    refit_delay, taken_share = settings
    classes = rows.classes
    at_visits = classes.visit_every > 0
    blocks = []
    # those without planned replacement apart: they need no count of planned ones
    for planned in (False, True):
        some = ~at_visits & (np.isfinite(classes.replace_at) == planned)
        if some.any():
            number = cells or _cell_count(float(classes.horizon[some].max()), sharpness, edges)
            blocks.append(Block(MidpointGrid(number, refit_delay), rows.of_classes(some), taken_share))
    if at_visits.any():
        some = rows.of_classes(at_visits)
        seen = (some.classes.horizon - some.classes.visit_next) / some.classes.visit_every
        most = max(int(np.floor(seen.max() + 1e-9)) + 1, 1)
        blocks.append(Block(VisitGrid(most), some, taken_share))
    return blocks


def _cell_count(horizon: float, sharpness: float, edges: FloatArray) -> int:
    """Cells fine against the spread of the lives (about scale / shape), with window edges between cells.

    sharpness: cells a unit of the clock.
    """
    least = int(np.clip(np.ceil(horizon * sharpness), LEAST_CELLS, MOST_CELLS))
    for number in range(least, MOST_CELLS + 1):
        if np.abs(edges * number - np.rint(edges * number)).max() < 1e-6:
            return number
    return MOST_CELLS


def _chunks(rows: Rows, sharpness: FloatArray, shares: FloatArray) -> list[tuple[IntArray, FloatArray]]:
    """Draws of like lives together, and how many draws each stands for.

    Most draws need few cells and orders; arrays stay within some tens of megabytes. Weak records leave draws with
    dozens of failures a position: slow to count, and too uncertain to need every one of them.
    """
    order = np.argsort(sharpness, kind="stable")
    wanted = rows.classes.horizon.max(initial=0.0) * sharpness[order]
    cells = np.clip(wanted, LEAST_CELLS, MOST_CELLS)
    level = np.floor(1.5 * np.log2(cells / LEAST_CELLS)).astype(np.int64)
    chunks = []
    for start, stop in _runs(level):
        thinning = 8 if wanted[start] > MANY_CELLS and stop - start >= 16 else 1
        mine = order[start:stop][thinning // 2 :: thinning]
        work = max(len(rows), 12 * len(rows.classes), 1) * 2.0 * cells[stop - 1]
        size = int(np.clip(1.2e6 / work, 1, mine.size))
        share = shares[mine] * (shares[order[start:stop]].sum() / shares[mine].sum())
        chunks += [(mine[first : first + size], share[first : first + size]) for first in range(0, mine.size, size)]
    return chunks


def _runs(level: IntArray) -> list[tuple[int, int]]:
    """(start, stop) of each run of equal values."""
    edges = [0, *(np.flatnonzero(np.diff(level)) + 1).tolist(), level.size]
    return list(pairwise(edges))


def _are_rare(rows: Rows, drawn: DesignDraws, duty: FloatArray, chunk: IntArray) -> bool:
    """Whether no position of these draws is likely to fail: then interpolation between ages is safe for every group."""
    if not len(rows):
        return False
    classes = rows.classes
    if classes.oldest.any():
        return False
    ages = np.linspace(0.0, rows.age.max(), 6)
    ahead = classes.horizon[:, None] * duty[chunk][:, classes.site][:, :, None]
    hazards = drawn.hazards(chunk, classes.running, classes)
    before = hazards.cumulative(np.broadcast_to(ages, (1, len(classes), ages.size)))
    with np.errstate(invalid="ignore"):
        most = (hazards.cumulative(ages + ahead) - before).max()
    # not so either where ages are impossible for the life
    return bool(most < _RARE_HAZARD)


def _representatives(means: FloatArray, shares: FloatArray, draws: int) -> tuple[IntArray, FloatArray]:
    """Some of the draws for the windows, and how many each stands for, with the mean of the totals kept.

    What a single week brings is mostly chance: of what the draws differ in it needs the level, not each site's.
    """
    return spoken_for(means[:, None], -(-means.size * WINDOW_DRAWS // draws), shares)


def _lives(
    block: Block, spans: FloatArray, drawn: DesignDraws, switched: bool, duty: FloatArray, chunk: IntArray
) -> BlockTails:
    classes = block.rows.classes
    running, fitted = (drawn.hazards(chunk, design, classes) for design in (classes.running, classes.fitted))
    later = drawn.hazards(chunk, classes.later, classes) if switched else None
    return BlockTails(block, spans, running, fitted, later, duty[chunk][:, classes.site])


def _side_by_side(lives: list[BlockTails], kind: str) -> list[FloatArray]:
    """For each target the tails of all rows, (draws, rows, orders)."""
    return [_joined(parts) for parts in zip(*(each.targets(kind) for each in lives), strict=True)]


def _joined(parts: Sequence[FloatArray]) -> FloatArray:
    if len(parts) == 1:
        return parts[0]
    orders = max(part.shape[2] for part in parts)
    padded = [np.pad(part, ((0, 0), (0, 0), (0, orders - part.shape[2]))) for part in parts]
    return np.concatenate(padded, axis=1)
