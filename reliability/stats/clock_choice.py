"""Which clock parts wear by: the one on which their lives vary least."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from reliability.stats.clock_choice_draws import drawn_log_shapes
from reliability.stats.errors import InvalidArgument, TooFewFailures, UndefinedEstimate
from reliability.stats.lifetimes import FloatArray, Lifetimes
from reliability.stats.weibull_fit import fit_weibull

LEAST_FAILURES = 5
LEAST_SITES = 4
MOST_INTERPOLATED = 0.5
SURE = 0.95
MOST_BLOCKS = 500
# closer than this two clocks vary alike
SAME = 1.0 + 1e-6


@dataclass(frozen=True)
class ClockVariation:
    """coefficient_of_variation: standard deviation over mean of life on this clock, with its interval.

    preferred_share: in which share of the samples drawn again this clock had the smallest.
    """

    coefficient_of_variation: float
    lower: float
    upper: float
    preferred_share: float


@dataclass(frozen=True)
class ClockChoice:
    """preferred: the clock that varies least in the records, None where they vary alike; sure: in 95 % of samples.

    refusal: why no clock can be preferred, or None; with a refusal `clocks` is empty and `preferred` None. drawn:
    whether whole "sites" or single "lives" were drawn again.
    """

    clocks: dict[str, ClockVariation]
    preferred: str | None
    sure: bool
    refusal: str | None
    drawn: str
    replicates: int
    confidence_level: float


def choose_clock(
    lives_by_clock: Mapping[str, Lifetimes],
    sites: ArrayLike | None = None,
    rng: np.random.Generator | None = None,
    *,
    interpolated_share: float = 0.0,
    replicates: int = 499,
    confidence_level: float = 0.95,
) -> ClockChoice:
    """The clock on which lives have the smaller coefficient of variation, with how often samples drawn again agree.

    lives_by_clock: the same lives in the same order on each clock, any mix of rows. The coefficient of variation is
    that of the Weibull fitted to all lives as one, sqrt(Gamma(1 + 2/k) / Gamma(1 + 1/k)^2 - 1), so that a clock that
    explains why sites differ gains by it. With four sites or more whole sites are drawn again, the same ones for each
    clock, else single lives. interpolated_share: the share of the counted strokes (or hours) that was interpolated at
    a constant rate a day; above one half the clocks are the same clock, and the choice is refused. rng=None draws the
    same every time. Farewell & Cox, Applied Statistics 28 (1979) 115-124; Kordonsky & Gertsbakh, Lifetime Data
    Analysis 3 (1997) 261-288.
    Raises InvalidArgument where the lives do not match, TooFewFailures below five, else as `fit_weibull`.
    """
    first = _refuse(lives_by_clock, interpolated_share, replicates, confidence_level)
    labels = first.sites if sites is None else np.asarray(sites)
    drawn, codes = _clusters(first, labels)
    refusal = _refusal(interpolated_share)
    if refusal is not None:
        return ClockChoice({}, None, False, refusal, drawn, 0, confidence_level)
    rng = np.random.default_rng(20) if rng is None else rng
    size = int(codes.max()) + 1
    times = rng.multinomial(size, np.full(size, 1.0 / size), size=replicates).astype(float)
    estimates, samples = [], []
    for lives in lives_by_clock.values():
        fit = fit_weibull(lives)
        estimates.append(variation_of(math.log(fit.shape)))
        samples.append(variation_of(drawn_log_shapes(lives, fit, codes, times)))
    table = np.array(samples)
    table = table[:, np.isfinite(table).all(axis=0)]
    shares = _preferred_shares(table)
    factor = special.stdtrit(size - 1.0, 0.5 + 0.5 * confidence_level) * math.sqrt(size / (size - 1.0))
    halves = factor * np.log(table).std(axis=1)
    clocks = {
        name: ClockVariation(estimate, estimate * math.exp(-half), estimate * math.exp(half), float(share))
        for name, estimate, half, share in zip(lives_by_clock, estimates, halves.tolist(), shares, strict=True)
    }
    least = [name for name, estimate in zip(clocks, estimates, strict=True) if estimate <= min(estimates) * SAME]
    best = least[0] if len(least) == 1 else None
    sure = best is not None and clocks[best].preferred_share >= SURE
    return ClockChoice(clocks, best, sure, None, drawn, table.shape[1], confidence_level)


def _preferred_shares(table: FloatArray) -> FloatArray:
    """In which share of the samples each clock's variation was the smallest, (clocks,); clocks alike share it."""
    if not table.shape[1]:
        raise UndefinedEstimate(
            "None of the samples drawn again lets a variation be fitted: too few sites have failures. Wait for more."
        )
    smallest = table <= table.min(axis=0) * SAME
    return (smallest / smallest.sum(axis=0)).mean(axis=1)


def variation_of(log_shape: ArrayLike) -> Any:
    """Coefficient of variation of a Weibull; a float, or an array as given."""
    short = np.exp(-np.asarray(log_shape))
    with np.errstate(over="ignore"):
        squares = np.expm1(special.gammaln(1.0 + 2.0 * short) - 2.0 * special.gammaln(1.0 + short))
    values = np.sqrt(np.maximum(squares, 0.0))
    return float(values) if values.ndim == 0 else values


def _refuse(
    lives_by_clock: Mapping[str, Lifetimes], interpolated_share: float, replicates: int, confidence_level: float
) -> Lifetimes:
    if len(lives_by_clock) < 2:
        raise InvalidArgument("A choice needs the same lives on at least two clocks.")
    if not (0.0 <= interpolated_share <= 1.0 and 0.0 < confidence_level < 1.0 and replicates >= 20):
        raise InvalidArgument(
            f"The interpolated share is {interpolated_share:g} and the confidence level {confidence_level:g}, both "
            f"shares; {replicates} samples must be at least 20."
        )
    first = next(iter(lives_by_clock.values()))
    for name, lives in lives_by_clock.items():
        if len(lives) != len(first) or (lives.observed != first.observed).any():
            raise InvalidArgument(
                f"The lives on the clock {name} are not those of the first clock: the rows that failed differ. "
                "Give the same lives in the same order."
            )
    if first.failures < LEAST_FAILURES:
        raise TooFewFailures(
            f"{first.failures:g} failures cannot show by which clock parts wear. Wait for {LEAST_FAILURES}.",
            failures=first.failures,
            needed=LEAST_FAILURES,
        )
    return first


def _refusal(interpolated_share: float) -> str | None:
    if interpolated_share <= MOST_INTERPOLATED:
        return None
    return (
        f"{100.0 * interpolated_share:.0f} % of the count was interpolated at a constant rate a day, so the two clocks "
        "are nearly one and the comparison would only repeat that. Read the counters more often."
    )


def _clusters(lives: Lifetimes, labels: ArrayLike | None) -> tuple[str, NDArray[np.int64]]:
    """What is drawn again and the cluster of each row, (n,)."""
    if labels is not None:
        marked = np.asarray(labels)
        if marked.shape != (len(lives),):
            raise InvalidArgument(f"The sites have shape {marked.shape}; one is needed for each of {len(lives)} lives.")
        names, codes = np.unique(marked.astype(str) if marked.dtype == object else marked, return_inverse=True)
        if names.size >= LEAST_SITES:
            return "sites", codes.astype(np.int64)
    # blocks of lives taken at random are as good as single lives, and keep the work small
    order = np.random.default_rng(7).permutation(len(lives))
    return "lives", order % min(len(lives), MOST_BLOCKS)
