"""Risk sets of several groups side by side, stratum by stratum, and the log-rank sums over them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reliability.stats.errors import InvalidArgument
from reliability.stats.lifetimes import FloatArray, IntArray, Lifetimes
from reliability.stats.ranks import ranked

WEIGHTINGS = ("fleming-harrington", "gehan", "tarone-ware", "peto-peto", "modified peto-peto")


@dataclass(frozen=True, eq=False)
class RiskSets:
    """One row for each failure age of each stratum, strata one after another, ages rising.

    stratum (J,), ages (J,); failures and at_risk of each group, shapes (J, K), weighted.
    """

    stratum: IntArray
    ages: FloatArray
    failures: FloatArray
    at_risk: FloatArray


def risk_sets(lifetimes: Lifetimes, groups: IntArray, count: int, strata: IntArray) -> RiskSets:
    """Failures and lives with entry < age <= duration, of each of `count` groups at each failure age."""
    ages, weights, failed = lifetimes.durations, lifetimes.weights, lifetimes.observed
    distinct = np.unique(ages[failed])
    width = distinct.size + 1
    # one number for stratum and age; searchsorted left: the first failure age at or after the duration
    at_failure = strata[failed] * width + np.searchsorted(distinct, ages[failed])
    keys, row = ranked(at_failure)
    failures = _table(row, groups[failed], weights[failed], keys.size, count)
    # at risk up to the last failure age that is not beyond the duration, after the last that is not beyond the entry
    leaves = strata * width + np.searchsorted(distinct, ages, side="right")
    enters = strata * width + np.searchsorted(distinct, lifetimes.entries, side="right")
    # a life is in the rows whose key lies in [enters, leaves)
    entered = _table(np.searchsorted(keys, enters), groups, weights, keys.size + 1, count)
    left = _table(np.searchsorted(keys, leaves), groups, weights, keys.size + 1, count)
    at_risk = np.cumsum(entered - left, axis=0)[:-1]
    # sums of weights up and down may leave dust where nobody is at risk
    at_risk = np.maximum(np.where(at_risk < 1e-9 * weights.max(), 0.0, at_risk), failures)
    return RiskSets(keys // width, distinct[keys % width], failures, at_risk)


def _table(rows: IntArray, groups: IntArray, weights: FloatArray, height: int, width: int) -> FloatArray:
    """Weights added up by row and group, shape (height, width)."""
    flat = np.bincount(rows * width + groups, weights=weights, minlength=height * width)
    return flat.astype(np.float64, copy=False).reshape(height, width)


def age_weights(sets: RiskSets, weighting: str, rho: float, gamma: float) -> FloatArray:
    """The weight of each failure age (J,), from all groups of its stratum together.

    With n at risk, d failures, S the Kaplan–Meier survival just before the age (left-continuous):
    "fleming-harrington" S^rho (1 - S)^gamma (rho = gamma = 0: 1, the log-rank test); "gehan" n; "tarone-ware" sqrt(n);
    "peto-peto" the product of 1 - d / (n + 1) up to and with the age; "modified peto-peto" that times n / (n + 1).
    """
    if weighting not in WEIGHTINGS:
        raise InvalidArgument(f"The weighting {weighting!r} is not known. Choose one of {', '.join(WEIGHTINGS)}.")
    if not (np.isfinite([rho, gamma]).all() and rho >= 0.0 and gamma >= 0.0):
        raise InvalidArgument(f"rho is {rho:g} and gamma {gamma:g}; both must be numbers of at least 0.")
    if weighting != "fleming-harrington" and (rho or gamma):
        raise InvalidArgument(f"rho and gamma belong to the weighting fleming-harrington, not to {weighting!r}.")
    failures, at_risk = sets.failures.sum(axis=1), sets.at_risk.sum(axis=1)
    if weighting == "gehan":
        return at_risk
    if weighting == "tarone-ware":
        return np.sqrt(at_risk)
    if weighting != "fleming-harrington":
        survival = _running_product(1.0 - failures / (at_risk + 1.0), sets.stratum)[1]
        return survival * at_risk / (at_risk + 1.0) if weighting.startswith("modified") else survival
    if rho == 0.0 and gamma == 0.0:
        return np.ones(at_risk.size)
    before = _running_product(1.0 - failures / at_risk, sets.stratum)[0]
    return before**rho * (1.0 - before) ** gamma


def _running_product(factors: FloatArray, stratum: IntArray) -> tuple[FloatArray, FloatArray]:
    """Product of the factors of the same stratum before each row, and with it."""
    before, upto = np.ones(factors.size), np.ones(factors.size)
    if not factors.size:  # nobody has failed
        return before, upto
    begins = np.flatnonzero(np.append(True, np.diff(stratum) > 0))
    for begin, end in zip(begins, np.append(begins[1:], factors.size), strict=True):
        upto[begin:end] = np.cumprod(np.maximum(factors[begin:end], 0.0))
        before[begin + 1 : end] = upto[begin : end - 1]
    return before, upto


def weighted_sums(sets: RiskSets, weights: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Weighted observed and expected failures (K,), and the covariance of their difference (K, K).

    expected = sum w d n_k / n; covariance = sum w^2 d (n - d) / (n - 1) (n_k / n) ([k = l] - n_l / n), the
    hypergeometric variance of tied failures. Klein & Moeschberger (2003), equation 7.3.
    """
    failures, at_risk = sets.failures.sum(axis=1), sets.at_risk.sum(axis=1)
    shares = sets.at_risk / at_risk[:, None]
    observed = weights @ sets.failures
    expected = (weights * failures) @ shares
    alone = at_risk <= 1.0
    size = weights**2 * failures * (at_risk - failures) / np.where(alone, 1.0, at_risk - 1.0)
    size = np.where(alone, 0.0, np.maximum(size, 0.0))
    covariance = np.diag(size @ shares) - (shares * size[:, None]).T @ shares
    return observed, expected, covariance


def label_codes(labels: NDArray[np.object_] | list[object] | None, count: int) -> IntArray:
    """Whole numbers for labels of any kind (tuples too), shape (count,); zeros for None."""
    if labels is None:
        return np.zeros(count, dtype=np.int64)
    column = np.asarray(labels)
    if column.ndim == 1 and column.dtype.kind == "i":
        codes = ranked(column.astype(np.int64, copy=False))[1]
    elif column.ndim == 1 and column.dtype.kind in "ufbUS":
        codes = np.unique(column, return_inverse=True)[1]
    else:
        known: dict[object, int] = {}
        codes = np.array([known.setdefault(label, len(known)) for label in list(labels)], dtype=np.int64)
    if codes.shape != (count,):
        raise InvalidArgument(f"strata has {codes.size} labels; it must have one for each of {count} rows.")
    return codes.astype(np.int64)


def joined_strata(*columns: NDArray[np.object_] | list[object] | None) -> IntArray:
    """Strata from several columns at once (site and position): a number for each combination that occurs."""
    present = [column for column in columns if column is not None]
    if not present:
        raise InvalidArgument("No column is given to make strata from. Give sites, positions or both.")
    joined = np.zeros(len(present[0]), dtype=np.int64)
    for column in present:
        codes = label_codes(column, joined.size)
        joined = np.unique(joined * (codes.max() + 1) + codes, return_inverse=True)[1].astype(np.int64)
    return joined
