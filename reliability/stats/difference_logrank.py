"""Do groups of lives differ? The log-rank family of tests."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import special

from reliability.stats.difference_sums import (
    age_weights,
    label_codes,
    risk_sets,
    weighted_sums,
)
from reliability.stats.errors import InvalidArgument, TooFewFailures, UndefinedEstimate, UnsupportedRows
from reliability.stats.lifetimes import FloatArray, Lifetimes

# a direction whose variance is below this share of the largest holds no comparison
NO_INFORMATION = 1e-10
# and below this variance a failure there is nothing but rounding: where weights vanish while both groups are at risk
ROUNDING = 1e-13


@dataclass(frozen=True, eq=False)
class LogRank:
    """Result of `logrank`; groups, lives, failures, observed, expected have shape (K,), covariance (K, K).

    statistic: chi-square with degrees_of_freedom. failures are plain counts; observed and expected are the sums the
    test compares, with the weights of the failure ages. p_value: two-sided chance of as large a statistic without any
    difference. No interval belongs to a test: give the restricted mean difference or the life ratio beside it.
    """

    statistic: float
    degrees_of_freedom: int
    p_value: float
    groups: NDArray[Any]
    lives: FloatArray
    failures: FloatArray
    observed: FloatArray
    expected: FloatArray
    covariance: FloatArray
    weighting: str
    rho: float
    gamma: float
    strata: int

    @property
    def score(self) -> FloatArray:
        """observed - expected of each group, shape (K,)."""
        return self.observed - self.expected

    @property
    def variance(self) -> float:
        """Variance of the first group's score; with two groups it is the second's too."""
        return float(self.covariance[0, 0])

    @property
    def z(self) -> float:
        """score of the first group over its standard error: above 0 the first group fails sooner. Two groups only."""
        if self.groups.size != 2:
            raise InvalidArgument(f"z compares two groups; here are {self.groups.size}. Use statistic.")
        return float(self.score[0] / np.sqrt(self.variance))


def logrank(
    lifetimes: Lifetimes,
    *,
    strata: Any = None,
    rho: float = 0,
    gamma: float = 0,
    weighting: str = "fleming-harrington",
) -> LogRank:
    """Log-rank test of the groups in `lifetimes.groups` (two or more), with late entry, weights and strata.

    At each failure age the d failures are shared out over the n at risk (entry < age <= duration, same stratum);
    observed - expected is added up over ages and strata, weighted by S^rho (1 - S)^gamma with S the left-continuous
    Kaplan–Meier survival of the stratum's groups together: rho = 1 looks at early failures, gamma = 1 at late ones.
    Other weightings: see `age_weights`. strata: labels of any kind, shape (n,); see `joined_strata` for two columns.

    Mantel, Cancer Chemotherapy Reports 50 (1966) 163-170; Harrington & Fleming, Biometrika 69 (1982) 553-566;
    Klein & Moeschberger, Survival Analysis (2003), sections 7.3 and 7.5.
    Raises InvalidArgument without two groups, TooFewFailures without a failure, UndefinedEstimate where at no failure
    age two groups were at risk side by side, UnsupportedRows for rows with last_good (see `counted_when_found`).
    """
    if lifetimes.groups is None or lifetimes.group_labels.size < 2:
        raise InvalidArgument("A comparison needs lives of at least two groups. Give each life its group.")
    if lifetimes.has_intervals:
        raise UnsupportedRows(
            f"{int(lifetimes.is_interval.sum())} rows failed somewhere between two ages; the log-rank test needs one "
            "age for each. Use counted_when_found where both groups are visited alike."
        )
    if not lifetimes.observed.any():
        raise TooFewFailures(
            f"None of {lifetimes.count:g} lives has failed, so nothing can be compared yet. Wait for failures.",
            failures=0,
            needed=1,
        )
    count = lifetimes.group_labels.size
    codes = label_codes(strata, len(lifetimes))
    sets = risk_sets(lifetimes, lifetimes.group_codes, count, codes)
    observed, expected, covariance = weighted_sums(sets, age_weights(sets, weighting, rho, gamma))
    failed = lifetimes.weights * lifetimes.observed
    statistic, freedom = _chi_square(observed - expected, covariance, ROUNDING * float(failed.sum()))
    if freedom == 0:
        raise UndefinedEstimate(
            "No failure happened while parts of two groups were at risk at the same age"
            f"{' in the same stratum' if strata is not None else ''}, and not all at once, so nothing can be compared. "
            "Wait for more records, or compare with fewer strata."
        )
    return LogRank(
        statistic=statistic,
        degrees_of_freedom=freedom,
        p_value=float(special.chdtrc(freedom, statistic)),
        groups=lifetimes.group_labels,
        lives=np.bincount(lifetimes.group_codes, weights=lifetimes.weights, minlength=count),
        failures=np.bincount(lifetimes.group_codes, weights=failed, minlength=count),
        observed=observed,
        expected=expected,
        covariance=covariance,
        weighting=weighting,
        rho=float(rho),
        gamma=float(gamma),
        strata=int(codes.max()) + 1,
    )


def _chi_square(score: FloatArray, covariance: FloatArray, rounding: float) -> tuple[float, int]:
    """score' covariance^- score and the rank: groups never at risk with another drop out."""
    values, vectors = np.linalg.eigh(covariance)
    if values[-1] <= rounding:
        return 0.0, 0
    used = values > NO_INFORMATION * float(values[-1])
    along = vectors[:, used].T @ score
    return float(along**2 @ (1.0 / values[used])), int(used.sum())


def counted_when_found(lifetimes: Lifetimes) -> Lifetimes:
    """The same lives with interval failures counted at the age at which they were found.

    Fair between groups only where both are visited alike; an estimate of life needs the intervals themselves.
    """
    return lifetimes.counted_when_found()


def counted_at_middle(lifetimes: Lifetimes) -> Lifetimes:
    """The same lives with interval failures counted at the middle of their interval, for methods that need one age.

    The error is small where intervals are short beside the spread of lives; fit_weibull takes the intervals themselves.
    """
    if not lifetimes.has_intervals:
        return lifetimes
    middle = 0.5 * (lifetimes.last_good + lifetimes.durations)
    return _with_durations(lifetimes, np.where(lifetimes.is_interval, middle, lifetimes.durations))


def _with_durations(lifetimes: Lifetimes, durations: FloatArray) -> Lifetimes:
    return Lifetimes(
        durations,
        lifetimes.observed,
        entries=lifetimes.entries,
        weights=lifetimes.weights,
        sites=lifetimes.sites,
        groups=lifetimes.groups,
    )
