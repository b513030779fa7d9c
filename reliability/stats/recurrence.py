"""How often units fail as they grow older: the mean cumulative function, and the names of what else is asked."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from reliability.stats.errors import InvalidArgument, TooFewFailures, UnsupportedRows
from reliability.stats.lifetimes import FloatArray
from reliability.stats.profile_intervals import normal_quantile
from reliability.stats.recurrence_expectation import RenewalExpectation, renewal_expectation
from reliability.stats.recurrence_histories import Histories, InvalidHistories
from reliability.stats.recurrence_power_law import PowerLawFit, fit_power_law
from reliability.stats.trend import (
    TrendTest,
    laplace_trend,
    lewis_robinson_trend,
    mil_hdbk_189_trend,
    renewal_trend,
    reverse_arrangements,
)

__all__ = [
    "Histories",
    "InvalidHistories",
    "MeanCumulativeFunction",
    "PowerLawFit",
    "RenewalExpectation",
    "TrendTest",
    "fit_power_law",
    "laplace_trend",
    "lewis_robinson_trend",
    "mean_cumulative_function",
    "mil_hdbk_189_trend",
    "renewal_expectation",
    "renewal_trend",
    "reverse_arrangements",
]

VARIANCES = ("nelson", "lawless-nadeau")
BANDS = ("log", "plain")


@dataclass(frozen=True, eq=False)
class MeanCumulativeFunction:
    """Mean number of failures a unit by each age, one entry for each distinct failure age, shape (k,), rising.

    mean is the value just after the age; at_risk counts units with start < age <= end. The pointwise band is [0, inf]
    where the chosen variance is not defined (Nelson's where one unit is left, or where it comes out negative).
    """

    times: FloatArray
    mean: FloatArray
    lower: FloatArray
    upper: FloatArray
    standard_error: FloatArray
    at_risk: FloatArray
    failures: FloatArray
    confidence_level: float
    variance: str
    band: str
    last_age: float

    def mean_at(self, ages: ArrayLike) -> FloatArray:
        """Mean number of failures by the ages, shape as given. Raises InvalidArgument outside [0, last_age]."""
        ages = np.asarray(ages, dtype=float)
        outside = ~((ages >= 0.0) & (ages <= self.last_age))
        if outside.any():
            raise InvalidArgument(
                f"The histories reach from 0 to {self.last_age:g}; age {ages[outside].ravel()[0]:g} lies outside."
            )
        return np.append(0.0, self.mean)[np.searchsorted(self.times, ages, side="right")]


def mean_cumulative_function(
    histories: Histories,
    variance: str = "lawless-nadeau",
    confidence_level: float = 0.95,
    *,
    band: str = "log",
) -> MeanCumulativeFunction:
    """M(t) = sum over failure ages t_j <= t of d_j / n_j: no assumption about how units fail, only that the end of
    observation has nothing to do with it.

    variance "lawless-nadeau" (robust): sum over clusters of [sum over units in it and ages of (d_ij - d_j / n_j) / n_j]
    squared, any histories. "nelson" (unbiased, divides by n - 1): histories from age 0 without clusters.
    band "log": M exp(± z se / M), never below 0; "plain": M ± z se, cut at 0.

    Lawless & Nadeau, Technometrics 37 (1995) 158-168; Nelson, Technometrics 37 (1995) 147-157; Meeker & Escobar,
    Statistical Methods for Reliability Data (1998), chapter 16.
    Raises TooFewFailures without a failure, UnsupportedRows for Nelson's variance with late starts or clusters.
    """
    z = normal_quantile(confidence_level)
    if variance not in VARIANCES:
        raise InvalidArgument(f"The variance {variance!r} is not known. Choose one of {', '.join(VARIANCES)}.")
    if band not in BANDS:
        raise InvalidArgument(f"The band {band!r} is not known. Choose one of {', '.join(BANDS)}.")
    if histories.event_times.size == 0:
        raise TooFewFailures(
            f"None of {histories.weights.sum():g} units has failed in {histories.exposure:g} of observation, so there "
            "is no curve. Say how much was observed without a failure.",
            failures=0,
            needed=1,
        )
    if variance == "nelson" and (histories.clusters is not None or (histories.starts > 0).any()):
        raise UnsupportedRows(
            "Nelson's variance is for units watched from age 0, one by one. Use lawless-nadeau where observation began "
            "late or units belong together."
        )
    times, row = np.unique(histories.event_times, return_inverse=True)
    failures = np.bincount(row, weights=histories.weights[histories.event_units], minlength=times.size)
    at_risk = units_at_risk(histories, times)
    mean = np.cumsum(failures / at_risk)
    chosen = _nelson if variance == "nelson" else _lawless_nadeau
    error = chosen(histories, times, row, failures, at_risk)
    lower, upper = _band(mean, error, z, band)
    return MeanCumulativeFunction(
        times=times,
        mean=mean,
        lower=lower,
        upper=upper,
        standard_error=error,
        at_risk=at_risk,
        failures=failures,
        confidence_level=confidence_level,
        variance=variance,
        band=band,
        last_age=float(histories.ends.max()),
    )


def units_at_risk(histories: Histories, ages: ArrayLike) -> FloatArray:
    """Units with start < age <= end at each age (weighted), shape as the ages."""
    ages = np.asarray(ages, dtype=float)
    counts = []
    for column in (histories.ends, histories.starts):
        order = np.argsort(column)
        from_here = np.append(np.cumsum(histories.weights[order][::-1])[::-1], 0.0)
        counts.append(from_here[np.searchsorted(column[order], ages, side="left")])
    return counts[0] - counts[1]


def _lawless_nadeau(
    histories: Histories, times: FloatArray, row: np.ndarray, failures: FloatArray, at_risk: FloatArray
) -> FloatArray:
    """Robust standard error at the times.

    The residual of a cluster is c - a G(t), a its units at risk, G = sum d_j / n_j^2; c and a change only at its own
    starts, failures and ends. So the sum of squares needs the sums of c^2, c a and a^2 alone, no table of units by
    ages.
    """
    drift = np.append(0.0, np.cumsum(failures / at_risk**2))
    at_start, at_end = (
        drift[np.searchsorted(times, column, side="right")] for column in (histories.starts, histories.ends)
    )
    ones, none = np.ones(len(histories)), np.zeros(row.size)
    members = np.arange(len(histories)) if histories.clusters is None else histories.clusters
    when = np.concatenate([histories.starts, histories.event_times, histories.ends])
    cluster = np.concatenate([members, members[histories.event_units], members])
    rise = np.concatenate([at_start, 1.0 / at_risk[row], -at_end])  # of c
    step = np.concatenate([ones, none, -ones])  # of a
    weight = np.concatenate([histories.weights, histories.weights[histories.event_units], histories.weights])
    order = np.lexsort((when, cluster))
    when, cluster, rise, step, weight = (column[order] for column in (when, cluster, rise, step, weight))
    begins = np.flatnonzero(np.append(True, np.diff(cluster) > 0))
    c, a = _sums_within(rise, begins), _sums_within(step, begins)
    before_c, before_a = c - rise, a - step
    changes = np.stack([c * c - before_c * before_c, c * a - before_c * before_a, a * a - before_a * before_a]) * weight
    at = np.searchsorted(times, when, side="left")
    totals = np.stack([np.cumsum(np.bincount(at, weights=part, minlength=times.size + 1))[:-1] for part in changes])
    now = drift[1:]
    return np.sqrt(np.maximum(totals[0] - 2.0 * now * totals[1] + now * now * totals[2], 0.0))


def _sums_within(values: FloatArray, begins: np.ndarray) -> FloatArray:
    """Running sums that begin anew at each of `begins`."""
    sums = np.cumsum(values)
    offset = np.append(0.0, sums)[begins]
    return sums - np.repeat(offset, np.diff(np.append(begins, values.size)))


def _nelson(
    histories: Histories, times: FloatArray, row: np.ndarray, failures: FloatArray, at_risk: FloatArray
) -> FloatArray:
    """Nelson's standard error at the times, inf from where it is not defined.

    Age k adds sum over the n_k units then at risk of (2 A_ik + d_ik / n_k) (d_ik - d_k / n_k) / (n_k - 1), where
    A_ik = sum of d_ij / n_j over earlier ages: the variance at k and the covariances with what came before, both from
    the units still there.
    """
    total, variance = 0.0, np.empty(times.size)
    earlier = np.zeros(len(histories))
    order = np.argsort(row, kind="stable")
    begins = np.searchsorted(row[order], np.arange(times.size + 1))
    by_end = np.argsort(-histories.ends)
    alive = np.searchsorted(-histories.ends[by_end], -times, side="right")
    for k in range(times.size):
        if not at_risk[k] > 1.0 or not np.isfinite(total):
            total = np.inf
        else:
            who, count = np.unique(histories.event_units[order[begins[k] : begins[k + 1]]], return_counts=True)
            present = by_end[: alive[k]]
            spread = failures[k] / at_risk[k]
            weights = histories.weights
            product = weights[who] @ (earlier[who] * count) - spread * (weights[present] @ earlier[present])
            own = weights[who] @ (count * count) - failures[k] * spread
            total += (2.0 * product + own / at_risk[k]) / (at_risk[k] - 1.0)
            earlier[who] += count / at_risk[k]
        variance[k] = total if total >= 0.0 else np.inf
    return np.sqrt(variance)


def _band(mean: FloatArray, error: FloatArray, z: float, band: str) -> tuple[FloatArray, FloatArray]:
    if band == "plain":
        return np.maximum(mean - z * error, 0.0), mean + z * error
    with np.errstate(over="ignore", under="ignore"):
        factor = np.exp(z * error / mean)
        return mean / factor, mean * factor
