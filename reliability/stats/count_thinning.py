"""Fewer draws that speak for many: a few parameter draws are counted in full, weighted so that the others are not lost.

What all draws would expect, site by site, is cheap to tell roughly, from hazards at a few ages. The draws that are
counted are spread over that, and their weights make the sites' means, and the mean and spread of the total, those of
all draws (calibration of weights by exponential tilting: Deville & Särndal 1992, Journal of the American Statistical
Association 87, 376-382).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from reliability.stats.count_designs import DesignDraws
from reliability.stats.count_masses import Hazards
from reliability.stats.count_positions import Rows

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

AGES = 4  # of a class, for what the draws expect
PIECES = 3  # of the span
STEPS = 30
SOFTNESS = 1e-3  # how far a site's mean may stay from that of all draws, in squared deviations of the draws
MOST_WEIGHT = 5.0  # times the plain share


def expected_by_site(rows: Rows, drawn: DesignDraws, duty: FloatArray, span: FloatArray) -> FloatArray:
    """Roughly the failures of each site within the span (shares of the horizon) by each draw, (draws, sites)."""
    classes = rows.classes
    every = np.arange(duty.shape[0])
    ages, index, weight = _few_ages(rows)
    ahead = classes.horizon * duty[:, classes.site]
    running, fitted = (drawn.hazards(every, design, classes) for design in (classes.running, classes.fitted))
    renewals = _renewals(fitted, ahead * float(span[1] - span[0]))[:, index]
    now = ages[None, :, None]
    edges = now + ahead[:, index, None] * np.linspace(span[0], span[1], PIECES + 1)
    gone = running.cumulative(edges, index) - running.cumulative(now, index)
    survival = np.exp(-np.nan_to_num(gone, nan=np.inf, posinf=np.inf))
    # a part that fails in the middle of a piece is followed by what is left of the span
    followed = 1.0 + (renewals[..., 1:] + renewals[..., :-1])[..., ::-1] / 2.0
    failures = (-np.diff(survival) * followed).sum(axis=2) + (1.0 - survival[..., 0]) * renewals[..., -1]
    member = np.zeros((index.size, len(rows.site_labels)))
    member[np.arange(index.size), classes.site[index]] = weight
    return failures @ member


def _few_ages(rows: Rows) -> tuple[FloatArray, IntArray, FloatArray]:
    """Mean age, class and weight of the quarters of each class's positions."""
    weight = np.maximum(rows.weights[-1], 0.0)
    order = np.lexsort((rows.age, rows.class_index))
    index = rows.class_index[order]
    before = np.cumsum(weight[order]) - weight[order] / 2.0
    whole = np.bincount(index, weight[order], minlength=len(rows.classes))
    start = (np.cumsum(whole) - whole)[index]
    quarter = np.minimum((before - start) / np.maximum(whole[index], 1e-300) * AGES, AGES - 1.0).astype(np.int64)
    _, place = np.unique(index * AGES + quarter, return_inverse=True)
    mass = np.bincount(place, weight[order])
    age = np.bincount(place, weight[order] * rows.age[order]) / np.maximum(mass, 1e-300)
    first = np.zeros(mass.size, dtype=np.int64)
    first[place[::-1]] = np.arange(place.size - 1, -1, -1)
    return age, index[first], mass


def _renewals(fitted: Hazards, age: FloatArray) -> FloatArray:
    """Failures of a place with a new part by equal pieces of an age, (draws, classes, pieces + 1)."""
    failed = 1.0 - np.exp(-fitted.cumulative(age[..., None] * np.linspace(0.0, 1.0, PIECES + 1)))
    share = np.diff(failed)
    found = np.zeros_like(failed)
    for piece in range(1, PIECES + 1):
        known = failed[..., piece] + share[..., 0] * found[..., piece - 1] / 2.0
        for back in range(1, piece):
            left = found[..., piece - back] + found[..., piece - back - 1]
            known = known + share[..., back] * left / 2.0
        found[..., piece] = known / (1.0 - share[..., 0] / 2.0)
    return found


def spoken_for(
    expected: FloatArray, keep: int, shares: FloatArray | None = None, further: FloatArray | None = None
) -> tuple[IntArray, FloatArray]:
    """Which draws to count, and how many draws each stands for; expected (draws, sites), shares (draws,) so far.

    further: other columns (draws, columns) whose means the weights are to keep.
    """
    draws = expected.shape[0]
    shares = np.ones(draws) if shares is None else shares
    if keep >= draws:
        return np.arange(draws), shares
    total = expected.sum(axis=1)
    order = np.argsort(total, kind="stable")
    sets = _finer_at_the_ends(order, keep)
    chosen = np.array([_middle(total[each], shares[each], each) for each in sets])
    plain = np.array([shares[each].sum() for each in sets])
    return chosen, plain * calibrated(_features(expected, total, shares, further)[chosen], plain)


def _finer_at_the_ends(order: IntArray, count: int) -> list[IntArray]:
    """`count` sets of neighbours, smaller where the outer bands are decided."""
    place = np.arange(1, count) / count
    share = place if order.size < 2 * count else 0.5 * place + 0.25 * (1.0 - np.cos(np.pi * place))
    edges = np.maximum(np.rint(share * order.size).astype(np.int64), np.arange(1, count))
    edges = np.minimum(edges, order.size - np.arange(count - 1, 0, -1))
    return np.split(order, edges)


def _middle(total: FloatArray, shares: FloatArray, draws: IntArray) -> int:
    return int(draws[np.argmin(np.abs(total - np.average(total, weights=shares)))])


def shapes_and_scales(drawn: DesignDraws, used: IntArray) -> FloatArray:
    """Each used design's log shape, log typical life, their squares and product, (draws, 5 designs): what the rough
    expectation leaves out goes with them.
    """
    shape = np.log(drawn.shapes[:, used])
    life = np.log(np.clip(drawn.scales[:, used], 1e-300, 1e300))
    shape, life = (column - np.median(column, axis=0) for column in (shape, life))
    return np.hstack([shape, life, shape**2, life**2, shape * life])


def _features(expected: FloatArray, total: FloatArray, shares: FloatArray, further: FloatArray | None) -> FloatArray:
    """What the weights have to get right, in deviations of all draws about their mean."""
    spread = (total - np.average(total, weights=shares)) ** 2
    sites = [expected] if expected.shape[1] > 1 else []
    columns = np.column_stack([total, spread, *sites, *([] if further is None else [further])])
    mean = np.average(columns, axis=0, weights=shares)
    deviation = np.sqrt(np.average((columns - mean) ** 2, axis=0, weights=shares))
    kept = deviation > 1e-9 * np.maximum(np.abs(columns).max(axis=0), 1e-300)
    return (columns[:, kept] - mean[kept]) / deviation[kept]


def calibrated(features: FloatArray, shares: FloatArray) -> FloatArray:
    """Factors on the shares (draws,) that bring the weighted mean of every feature (draws, features) near zero."""
    base = shares / shares.sum()
    for softness in SOFTNESS * 4.0 ** np.arange(10):
        factor = _tilted(base, features, _best_tilt(base, features, float(softness))) / base
        if factor.max() <= MOST_WEIGHT:
            return factor
    return np.ones(shares.size)


def _best_tilt(base: FloatArray, features: FloatArray, softness: float) -> FloatArray:
    """Minimises log sum base exp(-features tilt) + softness tilt^2 / 2, which is convex, by Newton's method."""

    def value(tilt: FloatArray) -> float:
        logs = -features @ tilt
        return float(logs.max() + np.log(base @ np.exp(logs - logs.max())) + softness * (tilt @ tilt) / 2.0)

    tilt = np.zeros(features.shape[1])
    for _ in range(STEPS):
        weight = _tilted(base, features, tilt)
        mean = weight @ features
        slope = softness * tilt - mean
        if np.abs(slope).max(initial=0.0) < 1e-6:
            break
        spread = (features * weight[:, None]).T @ features - np.outer(mean, mean)
        step = np.linalg.solve(spread + softness * np.eye(tilt.size), -slope)
        now, length = value(tilt), 1.0
        while length > 1e-3 and value(tilt + length * step) > now + 1e-4 * length * (slope @ step):
            length /= 2.0
        tilt = tilt + length * step
    return tilt


def _tilted(base: FloatArray, features: FloatArray, tilt: FloatArray) -> FloatArray:
    logs = -features @ tilt
    weight = base * np.exp(logs - logs.max())
    return weight / weight.sum()
