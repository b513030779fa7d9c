"""Counts that follow from counts: parts taken along with a failure, sums of independent forecasts, ages only known
at least.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import scipy.fft
from numpy.typing import ArrayLike, NDArray
from scipy.special import betaln, gammaln, ndtr

from reliability.stats.errors import InvalidArgument
from reliability.stats.posterior_draws import PosteriorDraws

FloatArray = NDArray[np.float64]


def sum_of_counts(pmfs: Sequence[ArrayLike]) -> FloatArray:
    """Probabilities of the sum of independent counts, by one FFT: bands of a sum are not sums of bands."""
    parts = [_checked(pmf) for pmf in pmfs]
    size = sum(part.size - 1 for part in parts) + 1
    length = scipy.fft.next_fast_len(size, real=True)
    spectrum = np.ones(length // 2 + 1, dtype=np.complex128)
    for part in parts:
        spectrum *= scipy.fft.rfft(part, length)
    return _cleaned(scipy.fft.irfft(spectrum, length)[:size])


def compound_counts(triggers: ArrayLike, each: ArrayLike) -> FloatArray:
    """Parts taken along when each of N failures takes M_i of them, independently: generating function G_N(G_M(z)).

    triggers: probabilities of N = 0, 1, ...; each: probabilities of M = 0, 1, ... (one bowed screw, three sleeves).
    Result: probabilities of the sum. Source: Johnson, Kemp & Kotz 2005, Univariate Discrete Distributions, ch. 9.
    """
    outer, inner = _checked(triggers), _checked(each)
    size = (outer.size - 1) * (inner.size - 1) + 1
    length = scipy.fft.next_fast_len(size, real=True)
    once = scipy.fft.rfft(inner, length)
    spectrum = np.zeros_like(once)
    for probability in outer[::-1]:
        spectrum = spectrum * once + probability
    return _cleaned(scipy.fft.irfft(spectrum, length)[:size])


def taken_along(triggers: ArrayLike, taken: float, left: float, *, prior: float = 0.5) -> FloatArray:
    """How many of N failures take a part along, its chance learned from `taken` of `taken + left` past ones.

    Beta-binomial given N with Jeffreys' prior (prior: what it adds to both numbers): the unknown chance is common to
    all failures, so the band is wider than a binomial's. Returns probabilities of 0, 1, ... up to the greatest N.
    """
    outer = _checked(triggers)
    if taken < 0 or left < 0:
        raise InvalidArgument(f"taken is {taken:g} and left {left:g}; counts of past failures cannot be negative.")
    first, second = taken + prior, left + prior
    number, share = np.meshgrid(np.arange(outer.size), np.arange(outer.size), indexing="ij")
    rest = np.maximum(number - share, 0)
    logs = gammaln(number + 1) - gammaln(share + 1) - gammaln(rest + 1)
    logs = logs + betaln(share + first, rest + second) - betaln(first, second)
    return _cleaned(outer @ np.where(share <= number, np.exp(logs), 0.0))


def ages_at_least(
    drawn: PosteriorDraws, least: float, *, longest: float = np.inf, nodes: int = 8
) -> tuple[FloatArray, FloatArray]:
    """Ages and weights (nodes,) that stand for one running part known only to be at least `least` old.

    In a fleet in steady renewal the age has a density proportional to survival (Cox 1962, ch. 5); it is cut at
    `longest` (the age of the module, say) and averaged over draws. The nodes are the means of equally likely parts;
    weights add up to 1.
    """
    if least < 0 or longest <= least:
        raise InvalidArgument(f"The age must lie between {least:g} and {longest:g}, which leaves no room.")
    scale = np.minimum(np.median(drawn.scales) * 8.0, 1e12)
    reach = min(longest, least + max(scale, least))
    grid = np.linspace(least, reach, 2001)
    middle = 0.5 * (grid[1:] + grid[:-1])
    survival = _survival(drawn, middle)
    # parts that survive nowhere on the grid are as old as is known
    survival = survival if survival.sum() > 0 else np.append(1.0, np.zeros(middle.size - 1))
    share = np.cumsum(survival) / survival.sum()
    part = np.minimum((share * nodes * (1 - 1e-12)).astype(np.int64), nodes - 1)
    weight = np.bincount(part, survival, minlength=nodes)
    total = np.bincount(part, survival * middle, minlength=nodes)
    used = weight > 0
    return total[used] / weight[used], weight[used] / survival.sum()


def _survival(drawn: PosteriorDraws, ages: FloatArray) -> FloatArray:
    """Survival at ages (n,), averaged over the draws."""
    ratio = ages[:, None] / drawn.scales
    with np.errstate(over="ignore"):
        weibull = np.exp(-(ratio**drawn.shapes))
    if drawn.deviations is None:
        return weibull.mean(axis=1)
    lognormal = ndtr(-np.log(ratio) / np.where(drawn.deviations > 0, drawn.deviations, 1.0))
    return np.where(drawn.deviations > 0, lognormal, weibull).mean(axis=1)


def _checked(pmf: ArrayLike) -> FloatArray:
    probabilities = np.asarray(pmf, dtype=np.float64)
    if probabilities.ndim != 1 or not probabilities.size or (probabilities < -1e-9).any():
        raise InvalidArgument("A distribution must list probabilities of 0, 1, 2 and so on.")
    if abs(probabilities.sum() - 1.0) > 1e-6:
        raise InvalidArgument(f"The probabilities add up to {probabilities.sum():g}; they must add up to 1.")
    return probabilities


def _cleaned(pmf: FloatArray) -> FloatArray:
    pmf = np.maximum(pmf, 0.0)
    return pmf / pmf.sum()
