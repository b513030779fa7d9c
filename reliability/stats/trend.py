"""Do units fail more often as they grow older? Trend tests for histories of repeated failures."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike
from scipy import special

from reliability.stats.difference_sums import label_codes
from reliability.stats.errors import InvalidArgument, TooFewFailures, UndefinedEstimate
from reliability.stats.lifetimes import FloatArray, IntArray
from reliability.stats.recurrence_histories import Histories

TRUNCATED = ("time", "failure")
# with so few values the null distribution of reversals is counted out
EXACT_REVERSALS = 60


@dataclass(frozen=True)
class TrendTest:
    """A test of no trend. p_value is two-sided; p_worsening (p_improving) the one-sided chance of failures coming as
    much later (earlier) in the units' lives, that is ever faster (slower), without any trend.

    degrees_of_freedom: of a chi-square statistic, None for a standard normal one. failures: those the test could use.
    """

    name: str
    statistic: float
    p_value: float
    p_worsening: float
    p_improving: float
    failures: float
    units: float
    truncated: str
    degrees_of_freedom: int | None = None


def laplace_trend(histories: Histories, *, truncated: str = "time") -> TrendTest:
    """Laplace's test against a constant rate of failures: U = sum (t - middle) / sqrt(sum n L^2 / 12), normal.

    Pooled over units, each with its own window (start, end] of length L and its own rate; "failure": each unit's window
    ends at its last failure, which is not counted. U above 0: worsening. It rejects nearly every young fleet of parts
    that wear, with no trend of the units at all: see `renewal_trend` and `lewis_robinson_trend`.
    Cox & Lewis, The Statistical Analysis of Series of Events (1966), chapter 3; Ascher & Feingold, Repairable Systems
    Reliability (1984). Raises TooFewFailures without a usable failure.
    """
    into, length, weights = _windows(histories, truncated)
    statistic = float(weights @ (into - 0.5 * length) / np.sqrt(weights @ length**2 / 12.0))
    return _normal("Laplace", statistic, histories, float(weights.sum()), truncated)


def mil_hdbk_189_trend(histories: Histories, *, truncated: str = "time") -> TrendTest:
    """MIL-HDBK-189 test against a constant rate: 2 sum log(L / t), chi-square with 2 N degrees of freedom.

    t is counted from the start of each unit's observation; pooled and truncated as `laplace_trend`. A small value means
    late failures: worsening. MIL-HDBK-189 (1981), appendix C; Ascher & Feingold (1984).
    """
    into, length, weights = _windows(histories, truncated)
    if (weights % 1.0 > 0.0).any():
        raise InvalidArgument("This test counts whole failures. Give whole weights, or use laplace_trend.")
    statistic = float(2.0 * weights @ np.log(length / into))
    freedom = 2 * round(float(weights.sum()))
    worsening = float(special.gammainc(0.5 * freedom, 0.5 * statistic))
    improving = float(special.gammaincc(0.5 * freedom, 0.5 * statistic))
    return TrendTest(
        "MIL-HDBK-189",
        statistic,
        min(1.0, 2.0 * min(worsening, improving)),
        worsening,
        improving,
        float(weights.sum()),
        float(histories.weights.sum()),
        truncated,
        freedom,
    )


def lewis_robinson_trend(histories: Histories, *, truncated: str = "time") -> TrendTest:
    """Lewis–Robinson test within units, pooled: do the times between failures of the same unit grow shorter?

    Given its number of failures, a unit whose parts are renewed alike has its n complete gaps in any order, however
    good or bad the unit and whatever the life of its parts. U = -sum over units of sum over j of (j - (n + 1) / 2) x
    gap_j / mean gap, over the root of its permutation variance, normal. For one unit with many failures this is Lewis
    and Robinson's statistic, Laplace's U over the coefficient of variation, times sqrt(n / (n + 1)); but unlike the
    latter it does not take the youth of a fleet with few failures a unit for a trend.

    A first gap that began before the observation is left out, and with truncated="failure" nothing changes: the
    running gap is used by neither. Only units with two complete gaps tell anything.
    Lewis & Robinson, in Reliability and Biometry (SIAM, 1974) 363-382; Kvaløy & Lindqvist, in Mathematical and
    Statistical Methods in Reliability (World Scientific, 2003) 171-186 (exchangeable gaps).
    Raises TooFewFailures where no unit has two complete gaps, UndefinedEstimate where all of a unit's are equal.
    """
    if truncated not in TRUNCATED:
        raise InvalidArgument(f"truncated is {truncated!r}; it must be time or failure.")
    complete = ~histories.is_first | (histories.starts[histories.event_units] == 0.0)
    gaps, owners = histories.gaps[complete], histories.event_units[complete]
    count = np.bincount(owners, minlength=len(histories))
    kept = count[owners] >= 2
    gaps, owners = gaps[kept], owners[kept]
    if gaps.size == 0:
        raise TooFewFailures(
            "No unit has two complete times between failures, so they cannot be compared within units. Wait for more.",
            failures=histories.failures,
            needed=histories.failures + 1,
        )
    first = np.append(True, np.diff(owners) > 0)
    begin = np.flatnonzero(first)
    sizes = count[owners[begin]].astype(float)
    order = np.arange(gaps.size) - np.repeat(begin, sizes.astype(int))
    means = np.add.reduceat(gaps, begin) / sizes
    shares = gaps / np.repeat(np.where(means > 0.0, means, 1.0), sizes.astype(int))
    weights = histories.weights[owners[begin]]
    spread = np.add.reduceat((shares - 1.0) ** 2, begin) / (sizes - 1.0)
    spread = np.where(spread > 1e-18, spread, 0.0)
    variance = float(weights @ (sizes * (sizes**2 - 1.0) / 12.0 * spread))
    if not variance > 0.0:
        raise UndefinedEstimate("All times between failures are equal, so chance has no part in them to test against.")
    centred = order - np.repeat(0.5 * (sizes - 1.0), sizes.astype(int))
    score = -float(weights @ np.add.reduceat(centred * shares, begin))
    return _normal("Lewis–Robinson", score / math.sqrt(variance), histories, float(weights @ sizes), truncated)


def renewal_trend(histories: Histories, *, entry_ages: ArrayLike = 0, strata: Any = None) -> TrendTest:
    """Trend against the renewal expectation: does a part fitted to an older unit fail sooner than an equally old part
    fitted to a younger one? Nothing is assumed about how the parts themselves wear.

    Sum over failures of (unit's age at the fitting - mean of it over the parts then at risk at the same age of part),
    over its standard error, normal: the score test of a factor on the hazard in a modulated renewal process. Valid with
    few failures a unit, late starts and any ends. entry_ages: age of the part in place at the start of each unit's
    observation, scalar or shape (n,); NaN where unknown (that part is left out). strata (n,): units compared only with
    their like (sites). Units that differ for good otherwise look like worsening: bad ones are renewed more often. Left
    within a stratum with variance 0.2 (0.5) of their hazards they raised the false alarms from 2.5 to 5 (15) %; where
    units have two failures or more, `lewis_robinson_trend` is proof against it.

    Cox, in Stochastic Point Processes (Wiley, 1972) 55-66; Oakes & Cui, Biometrika 81 (1994) 83-90.
    Raises TooFewFailures without a usable failure, UndefinedEstimate where all parts were fitted at one age of their
    units.
    """
    born, entry, duration, failed, unit = part_lives(histories, entry_ages)
    weights = histories.weights[unit]
    codes = label_codes(strata, len(histories))[unit]
    if not failed.any():
        raise TooFewFailures(
            "No failure of a part of known age is recorded, so there is no trend to test.", failures=0, needed=1
        )
    score, variance, used = _trend_sums(born, entry, duration, failed, weights, codes)
    if not variance > 0.0:
        raise UndefinedEstimate(
            "Every part that could be compared was fitted at the same age of its unit: there is no older unit to "
            "compare with. Wait until parts fitted to replace failed ones have failed in turn."
        )
    return _normal("modulated renewal", score / math.sqrt(variance), histories, used, "time")


def part_lives(
    histories: Histories, entry_ages: ArrayLike = 0
) -> tuple[FloatArray, FloatArray, FloatArray, np.ndarray, IntArray]:
    """The lives of parts between the failures: unit's age when fitted, entry, duration, failed, row of the unit.

    Parts of unknown age at the start of observation (NaN) are left out, as are those fitted at the very end.
    """
    count = len(histories)
    ages = np.broadcast_to(np.asarray(entry_ages, dtype=float), (count,))
    if (ages < 0.0).any():
        raise InvalidArgument(f"An age at the start of observation is {np.nanmin(ages):g}; it must be at least 0.")
    times, owners = histories.event_times, histories.event_units
    born = np.concatenate([histories.starts - ages, times])
    begins = np.concatenate([histories.starts, times])
    unit = np.concatenate([np.arange(count), owners])
    order = np.lexsort((begins, unit))
    # the order of equal ages is kept: the part in place comes before those fitted at that age
    born, begins, unit = born[order], begins[order], unit[order]
    last = np.append(np.diff(unit) > 0, True)
    ends = np.where(last, histories.ends[unit], np.append(begins[1:], 0.0))
    kept = ~np.isnan(born) & ~(last & (ends == begins))
    # two failures at one age: the second part failed at once
    duration = np.maximum(ends - born, np.finfo(float).tiny)
    return born[kept], (begins - born)[kept], duration[kept], ~last[kept], unit[kept]


def _trend_sums(
    born: FloatArray, entry: FloatArray, duration: FloatArray, failed: np.ndarray, weights: FloatArray, codes: IntArray
) -> tuple[float, float, float]:
    """Score, its variance with the hypergeometric factor for ties, and the failures with something to compare."""
    distinct = np.unique(duration[failed])
    width = distinct.size + 1
    keys, row = np.unique(codes[failed] * width + np.searchsorted(distinct, duration[failed]), return_inverse=True)
    enters = np.searchsorted(keys, codes * width + np.searchsorted(distinct, entry, side="right"))
    leaves = np.searchsorted(keys, codes * width + np.searchsorted(distinct, duration, side="right"))
    # far from 0 the squares would lose their digits
    middle = float(np.average(born, weights=weights))
    reach = max(float(np.abs(born - middle).max()), np.finfo(float).tiny)
    x = (born - middle) / reach
    sums = []
    for power in range(3):
        change = np.zeros(keys.size + 1)
        np.add.at(change, enters, weights * x**power)
        np.add.at(change, leaves, -weights * x**power)
        sums.append(np.cumsum(change)[:-1])
    deaths = np.bincount(row, weights=weights[failed], minlength=keys.size)
    at_risk = np.maximum(sums[0], deaths)
    mean = sums[1] / at_risk
    spread = np.maximum(sums[2] / at_risk - mean * mean, 0.0)
    spread = np.where(spread > 1e-12, spread, 0.0)
    shared = np.where(at_risk > 1.0, (at_risk - deaths) / np.maximum(at_risk - 1.0, 1e-300), 0.0)
    score = float(weights[failed] @ (x[failed] - mean[row]))
    return score, float((deaths * np.maximum(shared, 0.0)) @ spread), float(deaths[spread > 0.0].sum())


@dataclass(frozen=True)
class Reversals:
    """reversals: pairs i < j with the j-th time between failures longer than the i-th, of n (n - 1) / 2 pairs.

    Many: improving. Ties count for none. p values as in `TrendTest`.
    """

    reversals: int
    pairs: int
    p_value: float
    p_worsening: float
    p_improving: float


def reverse_arrangements(gaps: ArrayLike) -> Reversals:
    """Reverse-arrangement test of one unit's times between failures, in order (without the running one).

    Null distribution counted out up to 60 values, normal with mean n (n - 1) / 4 and variance
    (2 n + 5) (n - 1) n / 72 beyond. Mann, Econometrica 13 (1945) 245-259; NIST/SEMATECH e-Handbook, 8.2.3.4.
    """
    values = np.asarray(gaps, dtype=float)
    if values.ndim != 1 or values.size < 3 or not np.isfinite(values).all():
        raise TooFewFailures(
            "At least 3 times between failures are needed for this test.", failures=values.size, needed=3
        )
    count = values.size
    found = int(sum((values[place + 1 :] > values[place]).sum() for place in range(count - 1)))
    pairs = count * (count - 1) // 2
    if count <= EXACT_REVERSALS:
        chances = np.ones(1)
        for size in range(2, count + 1):
            chances = np.convolve(chances, np.full(size, 1.0 / size))
        improving, worsening = float(chances[found:].sum()), float(chances[: found + 1].sum())
    else:
        error = math.sqrt((2.0 * count + 5.0) * (count - 1.0) * count / 72.0)
        centre = 0.5 * pairs
        improving = float(special.ndtr(-(found - 0.5 - centre) / error))
        worsening = float(special.ndtr((found + 0.5 - centre) / error))
    return Reversals(found, pairs, min(1.0, 2.0 * min(improving, worsening)), worsening, improving)


def _windows(histories: Histories, truncated: str) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Age since the start, length of the window and weight, of each usable failure."""
    if truncated not in TRUNCATED:
        raise InvalidArgument(f"truncated is {truncated!r}; it must be time or failure.")
    owners = histories.event_units
    into = histories.event_times - histories.starts[owners]
    length, weights = (histories.ends - histories.starts)[owners], histories.weights[owners]
    if truncated == "failure" and owners.size:
        last = np.append(np.diff(owners) > 0, True)
        latest = np.zeros(len(histories))
        latest[owners[last]] = into[last]
        into, length, weights = into[~last], latest[owners[~last]], weights[~last]
    if into.size == 0:
        raise TooFewFailures(
            f"None of {histories.weights.sum():g} units has a failure this test can use. Wait for failures.",
            failures=histories.failures,
            needed=histories.failures + 1,
        )
    return into, length, weights


def _normal(name: str, statistic: float, histories: Histories, failures: float, truncated: str) -> TrendTest:
    worsening, improving = float(special.ndtr(-statistic)), float(special.ndtr(statistic))
    return TrendTest(
        name,
        statistic,
        min(1.0, 2.0 * min(worsening, improving)),
        worsening,
        improving,
        failures,
        float(histories.weights.sum()),
        truncated,
    )
