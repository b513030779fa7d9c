"""Times of work to draw from: hours a job, days waited for parts.

With many recorded ones they are resampled, each replicate from a resample of its own (Efron 1979, Annals of Statistics
7, 1), so that the uncertainty of the record is in the result. With few they follow a log-normal learned from them and
from the other sorts, each replicate with a draw of its posterior (see lead_times). `how` says which.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from reliability.stats.errors import InvalidArgument
from reliability.stats.lead_times import DurationPosterior, learned_durations

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

RESAMPLE_FROM = 20  # recorded ones; fewer hardly show a tail
OTHERS_SPREAD = 0.6  # sorts of jobs differ from each other by a factor of about two
JOB_SPREAD = 0.6  # and so do jobs of one sort


@dataclass(frozen=True, eq=False)
class RecordedTimes:
    """recorded: past times (n,), above 0, in hours or days; posterior: a log-normal for them; resampled: which serves.

    typical: the middle of the other sorts, where it served as prior.
    """

    recorded: FloatArray
    posterior: DurationPosterior
    resampled: bool
    typical: float | None

    @property
    def how(self) -> str:
        """Which distribution is drawn from, in words for the page's method."""
        count = self.recorded.size
        if self.resampled:
            return f"resampled from {count} recorded"
        if count:
            return f"log-normal fitted to {count} recorded, with the others' middle as prior"
        return (
            "log-normal around the others' middle; none is recorded" if self.typical else "a wide guess; none recorded"
        )

    @property
    def mean(self) -> float:
        """Expected time."""
        return float(self.recorded.mean()) if self.resampled else self.posterior.mean

    def prepared(self, replicates: int, rng: np.random.Generator) -> PreparedTimes:
        """A distribution for each replicate."""
        if self.resampled:
            own = self.recorded[rng.integers(0, self.recorded.size, (replicates, self.recorded.size))]
            return PreparedTimes(own, np.zeros(0), np.zeros(0), self.posterior)
        means, deviations = self.posterior.parameter_draws(replicates, rng)
        return PreparedTimes(None, means, deviations, self.posterior)


@dataclass(frozen=True, eq=False)
class PreparedTimes:
    """Resamples (replicates, n), or (own is None) mean and deviation of the logarithm (replicates,)."""

    own: FloatArray | None
    means: FloatArray
    deviations: FloatArray
    posterior: DurationPosterior

    def draws(self, replicates: IntArray, rng: np.random.Generator) -> FloatArray:
        """One time for each entry of `replicates`, (m,)."""
        if self.own is not None:
            return self.own[replicates, rng.integers(0, self.own.shape[1], replicates.size)]
        steps = rng.standard_normal(replicates.size)
        return np.exp(self.means[replicates] + self.deviations[replicates] * steps)

    def left(self, passed: float, replicates: int, rng: np.random.Generator) -> FloatArray:
        """What is left of a time of which `passed` has gone by, one for each replicate.

        Drawn from the recorded ones that are longer; where a replicate has none, from the log-normal beyond.
        """
        if passed <= 0:
            return self.draws(np.arange(replicates), rng)
        fitted = self.posterior.draws(replicates, rng, beyond=passed)
        if self.own is None:
            return fitted - passed
        # a uniform choice among those that are longer
        longer = self.own > passed
        count = longer.sum(axis=1)
        ordered = -np.sort(-self.own, axis=1)
        picked = np.floor(rng.random(replicates) * np.maximum(count, 1)).astype(np.int64)
        drawn = ordered[np.arange(replicates), picked]
        return np.where(count > 0, drawn, fitted) - passed


def learned_times(
    recorded: ArrayLike, *, typical: float | None = None, resample_from: int = RESAMPLE_FROM
) -> RecordedTimes:
    """Times to draw from: recorded ones (n,), above 0; typical: the middle of the other sorts, for a prior.

    Resampled from 20 recorded on, else log-normal with log mean normal(log typical, 0.6). Raises InvalidArgument.
    """
    times = np.atleast_1d(np.asarray(recorded, dtype=np.float64))
    if times.ndim != 1 or not (np.isfinite(times).all() and (times > 0).all()):
        raise InvalidArgument("Recorded times must be a list of finite numbers above 0.")
    if typical is not None and not (math.isfinite(typical) and typical > 0):
        raise InvalidArgument(f"The typical time is {typical:g}; it must be finite and above 0.")
    if resample_from < 1:
        raise InvalidArgument(f"resample_from is {resample_from}; it must be at least 1.")
    spread = OTHERS_SPREAD if typical is not None else None
    posterior = learned_durations(times, figure=typical, figure_spread=spread, usual_spread=JOB_SPREAD)
    return RecordedTimes(times, posterior, times.size >= resample_from, typical)


def fixed_time(value: float) -> RecordedTimes:
    """Always the same."""
    return learned_times([value], resample_from=1)
