"""Sites with interval rows: their gamma multiplier has no closed form and is integrated by quadrature."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray
from scipy import special

from reliability.stats.lifetimes import BoolArray, FloatArray, IntArray, Lifetimes
from reliability.stats.weibull_likelihood import IntervalRows, interval_row_hazards, interval_row_terms, interval_rows

if TYPE_CHECKING:
    from reliability.stats.site_likelihood import SiteSums

# a coarse look outward from the top, in standard deviations there
OUTWARD = np.array([-60.0, -30.0, -16.0, -11.0, -8.0, -6.5, -5.0, -3.0, 0.0, 3.0, 4.0, 5.0, 6.0, 7.0, 8.0, 12.0, 20.0])
# where the integrand has fallen by exp(-17) the rest is below 1e-7 of it
DEPTH = 17.0
# even steps in standard deviations, and at most in u, since functions of exp(u) need so many however wide they are
STEP, WIDEST_STEP, FEWEST_NODES, MOST_NODES = 0.85, 0.6, 16, 200
# nodes laid for another shape and level serve while the integrand still falls so far at both ends and its step there
# is not much wider than it would be
STILL_DEEP, STILL_CLOSE = 12.0, 1.3
MODE_STEPS = 40
# rows a site from which sums of powers are cheaper than the rows themselves
MANY_ROWS = 12
# log((1 - exp(-x)) / x) = sum of factor x^power, Bernoulli numbers over power times power factorial; to x = 2 the
# terms left out are below 1e-9
SERIES = (
    (1, -1 / 2),
    (2, 1 / 24),
    (4, -1 / 2880),
    (6, 1 / 181440),
    (8, -1 / 9676800),
    (10, 1 / 479001600),
    (12, -691 / 15692092416000),
    (14, 1 / 1046139494400),
    (16, -3617 / 170729965486080000),
)
LOG_SERIES_REACH = float(np.log(2.0))


@dataclass(frozen=True, eq=False)
class SiteIntervals:
    """Interval rows sorted by site. concerned (S,) marks the sites that have any; first_row (C,) where each begins."""

    rows: IntervalRows
    concerned: BoolArray
    first_row: IntArray
    site: NDArray[np.int64]  # position among the concerned sites of each row
    # the spreads last asked for and the nodes laid for them: near evaluations share them
    laid: list[tuple[FloatArray, FloatArray]] = field(default_factory=list, repr=False)


def site_intervals(lifetimes: Lifetimes, log_reference: float) -> SiteIntervals:
    rows = interval_rows(lifetimes, log_reference)
    codes = lifetimes.site_codes[lifetimes.is_interval]
    order = np.argsort(codes, kind="stable")
    present, first, position = np.unique(codes[order], return_index=True, return_inverse=True)
    concerned = np.zeros(lifetimes.site_labels.size, dtype=bool)
    concerned[present] = True
    sorted_rows = IntervalRows(rows.log_right[order], rows.log_ratio[order], rows.weights[order])
    return SiteIntervals(sorted_rows, concerned, first, position)


def site_interval_terms(
    intervals: SiteIntervals, sums: SiteSums, shape: float, level: float, spreads: FloatArray
) -> FloatArray:
    """The six terms of the concerned sites, shape (6, C, K).

    A site's integrand in u = log z, exp((D + 1/nu) u - (A + 1/nu) e^u) times the product of (1 - exp(-e^u D_i))^w_i,
    is log-concave. It is added up by the trapezoid rule around its top; derivatives are averages over the nodes.
    """
    by_shape = sums.by_shape[intervals.concerned][:, None, None]
    by_shape_twice = sums.by_shape_twice[intervals.concerned][:, None, None]
    z, rows, shares, value = _integrals(intervals, sums, shape, level, spreads)
    hazard = sums.hazard[intervals.concerned][:, None, None]
    at_shape = rows[1] - z * by_shape
    at_level = rows[2] - z * hazard
    shape_twice = rows[3] - z * by_shape_twice + at_shape * at_shape
    both = rows[4] - z * by_shape + at_shape * at_level
    level_twice = rows[5] - z * hazard + at_level * at_level
    means = [(shares * part).sum(axis=-1) for part in (at_shape, at_level, shape_twice, both, level_twice)]
    return np.stack(
        [
            value,
            means[0],
            means[1],
            means[2] - means[0] ** 2,
            means[3] - means[0] * means[1],
            means[4] - means[1] ** 2,
        ]
    )


def site_interval_multipliers(
    intervals: SiteIntervals, sums: SiteSums, shape: float, level: float, spreads: FloatArray
) -> FloatArray:
    """Mean of z given the records of the concerned sites, shape (C, K)."""
    z, shares = site_interval_nodes(intervals, sums, shape, level, spreads)
    return (shares * z).sum(axis=-1)


def site_interval_nodes(
    intervals: SiteIntervals, sums: SiteSums, shape: float, level: float, spreads: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Nodes of z of the concerned sites and their shares of its distribution given the records, shapes (C, K, J)."""
    z, _, shares, _ = _integrals(intervals, sums, shape, level, spreads)
    return z, shares


def _integrals(
    intervals: SiteIntervals, sums: SiteSums, shape: float, level: float, spreads: FloatArray
) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    """Nodes z (C, K, J), the rows' six terms there, the nodes' shares of the integral, and its log (C, K)."""
    precision = 1.0 / spreads[None, :]
    power = sums.failures[intervals.concerned][:, None] + precision
    rate = sums.hazard[intervals.concerned][:, None] + precision
    found = None
    for known, laid in intervals.laid:
        if known is spreads:
            u = laid
            found = _at_nodes(intervals, shape, level, power, rate, u)
    if found is None:
        u = _nodes(intervals, shape, level, power, rate)
        intervals.laid[:] = [(spreads, u)]
        z = np.exp(u)
        rows = _row_sums(intervals, shape, level, u)
        found = z, rows, power[..., None] * u - rate[..., None] * z + rows[0]
    z, rows, logs = found
    highest = logs.max(axis=-1, keepdims=True)
    shares = np.exp(logs - highest)
    total = shares.sum(axis=-1, keepdims=True)
    norm = precision * np.log(precision) - special.gammaln(precision)
    value = (highest + np.log(total))[..., 0] + np.log(u[..., 1] - u[..., 0]) + norm
    return z, rows, shares / total, value


def _at_nodes(
    intervals: SiteIntervals, shape: float, level: float, power: FloatArray, rate: FloatArray, u: FloatArray
) -> tuple[FloatArray, FloatArray, FloatArray] | None:
    """z, the rows' terms and the log integrand at nodes laid before; None where they no longer hold it all."""
    z = np.exp(u)
    rows = _row_sums(intervals, shape, level, u)
    logs = power[..., None] * u - rate[..., None] * z + rows[0]
    highest = logs.max(axis=-1)
    ends = np.maximum(logs[..., 0], logs[..., -1])
    if not (highest - ends > STILL_DEEP).all():
        return None
    top = np.argmax(logs, axis=-1)[..., None]
    bend = np.take_along_axis(rows[5] - rate[..., None] * z, top, axis=-1)[..., 0]
    steps = (u[..., 1] - u[..., 0]) * np.sqrt(np.maximum(-bend, 0.0))
    return (z, rows, logs) if bool((steps < STILL_CLOSE).all()) else None


def _nodes(intervals: SiteIntervals, shape: float, level: float, power: FloatArray, rate: FloatArray) -> FloatArray:
    """Even nodes over all of each integrand that counts, close enough for its width, shape (C, K, J).

    The integrand may be a narrow bell or a plateau with sharp ends (a site known only to have failed early): a coarse
    look outward from the top finds its ends. Functions of exp(u) need steps below 0.6 however wide they are.
    """
    top, width = _tops(intervals, shape, level, power, rate)
    u = top[..., None] + width[..., None] * OUTWARD
    logs = (
        power[..., None] * u - rate[..., None] * np.exp(np.minimum(u, 600.0)) + _row_sums(intervals, shape, level, u)[0]
    )
    depth = logs.max(axis=-1, keepdims=True) - logs
    inside = depth < DEPTH
    count = OUTWARD.size
    first = np.maximum(np.argmax(inside, axis=-1) - 1, 0)
    last = np.minimum(count - np.argmax(inside[..., ::-1], axis=-1), count - 1)
    low, high = (np.take_along_axis(u, at[..., None], axis=-1) for at in (first, last))
    steps = (high - low)[..., 0] / np.minimum(STEP * width, WIDEST_STEP)
    nodes = int(min(max(np.ceil(steps.max()), FEWEST_NODES), MOST_NODES))
    return low + (high - low) * np.linspace(0.0, 1.0, nodes + 1)


def _row_sums(intervals: SiteIntervals, shape: float, level: float, u: FloatArray) -> FloatArray:
    """Sums over the interval rows of each site of the six terms at multipliers exp(u): u (C, ...), sums (6, C, ...)."""
    rows, flat = intervals.rows, u.reshape(u.shape[0], -1)
    widest = np.exp(flat.max(axis=1))[intervals.site]
    log_difference, ratio, curl = interval_row_hazards(rows, shape, level)
    short = log_difference + np.log(widest) < LOG_SERIES_REACH
    if short.sum() < MANY_ROWS * u.shape[0]:
        short = np.zeros(short.size, dtype=bool)
    total = np.zeros((6, *flat.shape))
    if short.any():
        total += _series_sums(intervals, short, log_difference, ratio, curl, flat)
    if not short.all():
        site = intervals.site[~short]
        chosen = [column[~short, None] for column in (rows.log_right, rows.log_ratio, rows.weights)]
        terms = interval_row_terms(IntervalRows(*chosen), shape, level + flat[site])
        starts = np.flatnonzero(np.append(True, np.diff(site) > 0))
        for index, term in enumerate(terms):
            total[index, site[starts]] += np.add.reduceat(term * chosen[2], starts, axis=0)
    return total.reshape(6, *u.shape)


def _series_sums(
    intervals: SiteIntervals,
    short: BoolArray,
    log_difference: FloatArray,
    ratio: FloatArray,
    curl: FloatArray,
    u: FloatArray,
) -> FloatArray:
    """The same for rows whose hazard x = z D stays small, from log(1 - exp(-x)) = log x - x / 2 + x^2 / 24 - ….

    The series needs only sums of weight D^p over the rows of a site, however many rows there are. With D_a = D m the
    derivatives of D^p in log shape are p D^p m and p^2 D^p m^2 + p D^p m'.
    """
    site, weights, count = intervals.site[short], intervals.rows.weights[short], intervals.first_row.size
    log_d, m, m_slope = log_difference[short], ratio[short], curl[short]

    # the rows are sorted by site
    begins = np.flatnonzero(np.append(True, np.diff(site) > 0))
    powers = np.array([power for power, _ in SERIES], dtype=float)[:, None]
    factors = np.array([factor for _, factor in SERIES])
    powered = weights * _powers_of(np.exp(log_d)[None])[0]
    rows = np.concatenate(
        [
            powered,
            powered * m,
            powered * (powers**2 * m * m + powers * m_slope),
            weights * np.stack([np.ones_like(m), log_d, m, m_slope]),
        ]
    )
    sums = np.zeros((rows.shape[0], count))
    sums[:, site[begins]] = np.add.reduceat(rows, begins, axis=1)
    plain, first, second = sums[: 3 * len(SERIES)].reshape(3, len(SERIES), count)
    lives, log_sum, slope, slope_twice = sums[3 * len(SERIES) :, :, None]
    # coefficients (C, 6, powers) of the six terms times the powers of z (C, powers, ...): one product of matrices
    terms = np.stack([plain, powers * first, powers * plain, second, powers**2 * first, powers**2 * plain])
    total = np.moveaxis((terms.transpose(2, 0, 1) * factors) @ _powers_of(np.exp(u)), 1, 0)
    total[0] += lives * u + log_sum
    total[1] += slope
    total[2] += lives
    total[3] += slope_twice
    return total


def _powers_of(z: FloatArray) -> FloatArray:
    """z to the powers of the series, shape (C, powers, ...), by multiplying on."""
    square = z * z
    made = [z, square]
    while len(made) < len(SERIES):
        made.append(made[-1] * square)
    return np.stack(made, axis=1)


def _tops(
    intervals: SiteIntervals, shape: float, level: float, power: FloatArray, rate: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Top of each integrand in u and its standard deviation there, shapes (C, K); Newton on a concave function."""
    u = _start_of_tops(intervals, shape, level, power, rate)
    for _ in range(MODE_STEPS):
        rows = _row_sums(intervals, shape, level, u)
        z = np.exp(u)
        slope = power - rate * z + rows[2]
        bend = np.minimum(-rate * z + rows[5], -1e-12)
        step = np.clip(-slope / bend, -1.0, 1.0)
        u = u + step
        if float(np.max(np.abs(step) * np.sqrt(-bend))) < 0.05:
            break
    return u, 1.0 / np.sqrt(-bend)


def _start_of_tops(
    intervals: SiteIntervals, shape: float, level: float, power: FloatArray, rate: FloatArray
) -> FloatArray:
    """Where the integrand's slope vanishes if each interval row's share of it is taken as straight about z = 1.

    A row adds x / (e^x - 1) to the slope in u, x = z D; near enough to the top to save Newton most of its steps.
    """
    x = np.exp(np.clip(interval_row_hazards(intervals.rows, shape, level)[0], -30.0, 5.0))
    grown = np.expm1(x)
    value, slope = x / grown, (grown - x * (1.0 + grown)) / grown**2
    short = x < 1e-3
    value, slope = np.where(short, 1.0 - 0.5 * x, value), np.where(short, x / 6.0 - 0.5, slope)
    weights = intervals.rows.weights
    at_none, with_z = (
        np.add.reduceat(weights * term, intervals.first_row)[:, None] for term in (value - slope * x, -slope * x)
    )
    return np.log((power + at_none) / (rate + with_z))
