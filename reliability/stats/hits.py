"""How many actual figures a right forecaster's bands would hold, and the plain Poisson count beside it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import gammaln, stdtrit

from reliability.stats.count_results import CountDistribution
from reliability.stats.errors import InvalidArgument

FloatArray = NDArray[np.float64]
ONE_IN_TEN = 0.1


@dataclass(frozen=True)
class OrdinaryHits:
    """Counts from `low` to `high` are ordinary; `chance` is the probability of a count within."""

    low: int
    high: int
    chance: float


def hits_of_right_forecasts(masses: ArrayLike) -> CountDistribution:
    """Number of bands that hold the actual figure, where each band holds it with the probability it promises.

    masses: probability that the forecast gave to its own band, shape (n,), each in 0 to 1. Bands of counts hold at
    least their level, often more, so each one's own mass is taken. Independent trials of unequal probability: the
    Poisson binomial distribution (Poisson 1837), by multiplying out its generating function prod(1 - p + p z); with
    equal masses the binomial. Raises InvalidArgument for masses outside 0 to 1.
    """
    checked = np.atleast_1d(np.asarray(masses, dtype=np.float64))
    if checked.ndim != 1 or not ((checked >= 0) & (checked <= 1)).all():
        raise InvalidArgument("masses must be a row of probabilities from 0 to 1.")
    return CountDistribution(_multiplied(checked))


def ordinary_hits(masses: ArrayLike, tail: float = ONE_IN_TEN) -> OrdinaryHits:
    """The narrowest counts outside of which each side has a chance of at most `tail`.

    P(N < low) <= tail and P(N > high) <= tail with the greatest such low and the smallest such high. With 8 bands of
    mass 0.8: 5 to 8 (P(N < 5) = 0.056, P(N < 6) = 0.203: binomial).
    """
    if not 0 < tail < 0.5:
        raise InvalidArgument(f"tail is {tail:g}; it must lie between 0 and 0.5.")
    pmf = hits_of_right_forecasts(masses).pmf
    below = np.concatenate([[0.0], np.cumsum(pmf)[:-1]])  # P(N < k)
    above = np.concatenate([np.cumsum(pmf[::-1])[::-1][1:], [0.0]])  # P(N > k)
    low = int(np.flatnonzero(below <= tail + 1e-12)[-1])
    high = int(np.flatnonzero(above <= tail + 1e-12)[0])
    return OrdinaryHits(min(low, high), max(low, high), float(pmf[min(low, high) : max(low, high) + 1].sum()))


def poisson_count(mean: float) -> CountDistribution:
    """Poisson probabilities of 0, 1, 2 ... with this mean (>= 0), cut where they no longer matter."""
    if not 0 <= mean < np.inf:
        raise InvalidArgument(f"mean is {mean:g}; it must be a number of at least 0.")
    if mean == 0:
        return CountDistribution(np.array([1.0]))
    counts = np.arange(int(mean + 12 * np.sqrt(mean) + 20))
    pmf = np.exp(counts * np.log(mean) - mean - gammaln(counts + 1))
    return CountDistribution(pmf / pmf.sum())


def mean_with_interval(values: ArrayLike, confidence_level: float = 0.95) -> tuple[float, float, float]:
    """Mean of values, shape (n,), and Student's interval for it (Student 1908, Biometrika 6, 1).

    With one value the interval is the whole line: nothing is known of its spread.
    """
    row = np.asarray(values, dtype=np.float64)
    if row.ndim != 1 or row.size == 0:
        raise InvalidArgument("values must be a row of at least one number.")
    if row.size == 1:
        return float(row[0]), -np.inf, np.inf
    reach = stdtrit(row.size - 1, (1 + confidence_level) / 2) * row.std(ddof=1) / np.sqrt(row.size)
    return float(row.mean()), float(row.mean() - reach), float(row.mean() + reach)


def _multiplied(masses: FloatArray) -> FloatArray:
    pmf = np.array([1.0])
    for mass in masses:
        pmf = np.convolve(pmf, [1.0 - mass, mass])
    return pmf
