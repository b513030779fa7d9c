"""Log-likelihood of lives under the generalised gamma, of which the Weibull and the lognormal are two points."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy import special

from reliability.stats.lifetimes import FloatArray, IntArray, Lifetimes
from reliability.stats.lognormal_likelihood import HALF_LOG_TWO_PI

# closer to the lognormal than this, the two agree to the last digits that a test needs
NORMAL_WITHIN = 1e-6
# distinct ages beyond which they are merged by a thousandth: no bend is so sharp
MOST_AGES = 20_000
LEAST_SURVIVAL = 1e-290


@dataclass(frozen=True, eq=False)
class BendLikelihood:
    """Log-likelihood in (mu, log sigma, Q), w = (log age - mu) / sigma, each life's hazard times a known multiplier z.

    S(w) = P(k, k exp(Q w)) upper for Q > 0 and lower for Q < 0, k = 1 / Q^2; Q = 1 is the Weibull, Q = 0 the lognormal.
    A row gives log h - log age + z log S (exact), z log S (withdrawn), log(S_L^z - S_R^z) (interval), minus z log S at
    its entry; terms linear in z are added up by age, so an evaluation costs as much as there are distinct ages.
    Prentice, Biometrika 61 (1974) 539-544; Lawless (2003), section 5.3.
    """

    log_ages: FloatArray  # distinct, from the reference age, shape (a,)
    survival_weights: FloatArray  # sum of signed weight x multiplier at each age, (a,)
    failure_weights: FloatArray  # exact failures at each age, (a,)
    left: IntArray  # place of each interval's ends among the ages, (m,); left -1 where it begins at 0
    right: IntArray
    interval_weights: FloatArray
    interval_multipliers: FloatArray

    def __call__(self, mu: float, log_sigma: float, q: float) -> float:
        sigma = math.exp(log_sigma)
        w = (self.log_ages - mu) / sigma
        with np.errstate(over="ignore", under="ignore", invalid="ignore", divide="ignore"):
            log_survival = log_survival_of(w, q)
            value = float(self.survival_weights @ log_survival)
            failed = self.failure_weights > 0.0
            log_hazard = log_density_of(w[failed], q) - log_survival[failed] - log_sigma
            value += float(self.failure_weights[failed] @ log_hazard)
            if self.left.size:
                before = np.where(self.left >= 0, log_survival[self.left], 0.0)
                fall = self.interval_multipliers * (log_survival[self.right] - before)
                chance = self.interval_multipliers * before + np.log(-np.expm1(fall))
                value += float(self.interval_weights @ chance)
        return value if math.isfinite(value) else -math.inf


def log_survival_of(w: FloatArray, q: float) -> FloatArray:
    """log S at the standardised log ages, to the last digits also far out in the tail."""
    if abs(q) < NORMAL_WITHIN:
        return special.log_ndtr(-w)
    k = q**-2.0
    u = k * np.exp(np.minimum(q * w, 600.0))
    survival = special.gammaincc(k, u) if q > 0.0 else special.gammainc(k, u)
    far = survival < LEAST_SURVIVAL
    value = np.log(np.where(far, 1.0, survival))
    if far.any():
        log_u, u = math.log(k) + q * w[far], u[far]
        # the leading terms of the incomplete gamma functions for large and for small u
        rest = -np.log1p(-(k - 1.0) / u) if q > 0.0 else np.log(u / k) + np.log1p(u / (k + 1.0))
        value[far] = (k - 1.0) * log_u - u - special.gammaln(k) + rest
    return value


def log_density_of(w: FloatArray, q: float) -> FloatArray:
    """log of the density of w."""
    if abs(q) < NORMAL_WITHIN:
        return -0.5 * w * w - HALF_LOG_TWO_PI
    k = q**-2.0
    # log |q| + k log k - k - log Gamma(k) by Stirling's series where k is large and the terms would cancel
    if k > 100.0:
        constant = -HALF_LOG_TWO_PI - 1.0 / (12.0 * k) + 1.0 / (360.0 * k**3)
    else:
        constant = math.log(abs(q)) + k * math.log(k) - k - math.lgamma(k)
    return constant - k * (np.expm1(np.minimum(q * w, 600.0)) - q * w)


def bend_likelihood(lifetimes: Lifetimes, multipliers: FloatArray, log_reference: float) -> BendLikelihood:
    """Prepare the rows once; multipliers (n,) of each life's hazard."""
    exact, interval = lifetimes.is_exact, lifetimes.is_interval
    late = lifetimes.entries > 0.0
    weighted = lifetimes.weights * multipliers
    columns = [lifetimes.durations, lifetimes.entries[late], lifetimes.last_good[interval]]
    every = _merged(np.concatenate(columns))
    ages, place = np.unique(every, return_inverse=True)
    at_end, at_entry, at_good = np.split(place, np.cumsum([column.size for column in columns])[:-1])
    known = ~interval
    survival = np.bincount(at_end[known], weights=weighted[known], minlength=ages.size)
    survival -= np.bincount(at_entry, weights=weighted[late], minlength=ages.size)
    left = np.where(ages[at_good] > 0.0, at_good, -1)
    # age 0 stands only for intervals that begin there
    begins = int(ages[0] <= 0.0)
    return BendLikelihood(
        log_ages=np.log(ages[begins:]) - log_reference,
        survival_weights=survival[begins:],
        failure_weights=np.bincount(at_end[exact], weights=lifetimes.weights[exact], minlength=ages.size)[begins:],
        left=np.where(left >= 0, left - begins, -1),
        right=at_end[interval] - begins,
        interval_weights=lifetimes.weights[interval],
        interval_multipliers=multipliers[interval],
    )


def _merged(ages: FloatArray) -> FloatArray:
    if np.unique(ages).size <= MOST_AGES:
        return ages
    with np.errstate(divide="ignore"):
        return np.where(ages > 0.0, np.exp(np.round(np.log(ages) * 1000.0) / 1000.0), 0.0)
