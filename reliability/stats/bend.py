"""Does the Weibull line bend: a test with one degree of freedom inside the generalised gamma."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy import special

from reliability.stats.bend_likelihood import BendLikelihood, bend_likelihood, log_survival_of
from reliability.stats.errors import InvalidArgument, TooFewFailures
from reliability.stats.lifetimes import FloatArray, Lifetimes
from reliability.stats.newton import Evaluation, maximise
from reliability.stats.site_spread import WeibullSiteFit
from reliability.stats.weibull_fit import fit_weibull
from reliability.stats.weibull_likelihood import reference_log_age

LEAST_FAILURES = 10
Q_LIMITS = (-8.0, 8.0)
WEIBULL, LOGNORMAL = 1.0, 0.0
# where the search steps in standard errors, and how far from the estimate differences are taken
LARGEST_STEP, DIFFERENCE = 3.0, 0.03
FARTHEST = 60.0
MOST_STEPS = 40


@dataclass(frozen=True)
class BendTest:
    """The Weibull, and the lognormal, against the generalised gamma of the same lives.

    p_value, statistic: likelihood ratio of the Weibull (Q = 1), chi-square with 1 degree of freedom; p_value_lognormal:
    of the lognormal (Q = 0). q: the estimate of Q. largest_gap: the greatest distance in share failed between the
    Weibull line and the free curve from the first to the last failure's age, at gap_age (unit of the durations).
    visible: the gap is at least minimum_gap. warn: visible, and p_value below significance. site_spread: whether the
    sites' multipliers were taken out first.
    """

    p_value: float
    p_value_lognormal: float
    statistic: float
    q: float
    largest_gap: float
    gap_age: float
    minimum_gap: float
    significance: float
    site_spread: bool

    @property
    def visible(self) -> bool:
        return self.largest_gap >= self.minimum_gap

    @property
    def warn(self) -> bool:
        return self.visible and self.p_value < self.significance


def bend_test(
    lifetimes: Lifetimes, *, site_spread: bool = False, minimum_gap: float = 0.03, significance: float = 0.05
) -> BendTest:
    """Likelihood-ratio test of Q = 1 inside the generalised gamma, any mix of rows.

    site_spread=True: each life's hazard is first multiplied by its site's expected multiplier under the Weibull with
    site spread, since sites that differ bend the pooled line by themselves; the score for Q is then that of the
    likelihood averaged over the sites' multipliers. Both points lie inside the family, so the ratio is chi-square;
    that of a mixture or of a third (threshold) parameter is not. Farewell & Prentice, Technometrics 19 (1977) 69-75.
    Raises TooFewFailures below ten, else as `fit_weibull`.
    """
    if not (0.0 <= minimum_gap < 1.0 and 0.0 < significance < 1.0):
        raise InvalidArgument(
            f"The smallest gap is {minimum_gap:g} and the significance {significance:g}; both are shares below 1."
        )
    if lifetimes.failures < LEAST_FAILURES:
        raise TooFewFailures(
            f"{lifetimes.failures:g} failures cannot show whether the line bends. Wait for {LEAST_FAILURES}.",
            failures=lifetimes.failures,
            needed=LEAST_FAILURES,
        )
    fit = fit_weibull(lifetimes, site_spread=site_spread)
    multipliers = np.ones(len(lifetimes))
    if isinstance(fit, WeibullSiteFit):
        by_site = fit.site_multipliers
        multipliers = np.array([by_site[label] for label in lifetimes.site_labels.tolist()])[lifetimes.site_codes]
    log_reference = reference_log_age(lifetimes)
    likelihood = bend_likelihood(lifetimes, multipliers, log_reference)
    start = np.array([math.log(fit.scale) - log_reference, -math.log(fit.shape), WEIBULL])
    failures = max(float(lifetimes.failures), 1.0)
    errors = np.array([1.0 / fit.shape, 0.8, 1.5]) / math.sqrt(failures)
    weibull, straight = _highest(likelihood, start, errors, WEIBULL)
    normal, _ = _highest(likelihood, start + np.array([-0.37 / fit.shape, 0.25, -1.0]), errors, LOGNORMAL)
    free, bent = _highest(likelihood, straight, errors, None)
    free = max(free, weibull, normal)
    statistic = 2.0 * (free - weibull)
    gap, age = _largest_gap(lifetimes, straight, bent, log_reference)
    return BendTest(
        p_value=float(special.chdtrc(1.0, statistic)),
        p_value_lognormal=float(special.chdtrc(1.0, 2.0 * (free - normal))),
        statistic=statistic,
        q=float(bent[2]),
        largest_gap=gap,
        gap_age=age,
        minimum_gap=minimum_gap,
        significance=significance,
        site_spread=site_spread,
    )


def _highest(
    likelihood: BendLikelihood, start: FloatArray, errors: FloatArray, q: float | None
) -> tuple[float, FloatArray]:
    """Largest log-likelihood and its point; with q held there unless None. Steps and differences in standard errors."""
    size = 3 if q is None else 2

    def value_at(u: FloatArray) -> float:
        point = start[:size] + u * errors[:size]
        return likelihood(float(point[0]), float(point[1]), float(point[2]) if q is None else q)

    def at(u: FloatArray) -> Evaluation:
        return by_differences(value_at, u)

    low, high = np.full(size, -FARTHEST), np.full(size, FARTHEST)
    if q is None:
        low[2], high[2] = ((limit - start[2]) / errors[2] for limit in Q_LIMITS)
    top = maximise(at, np.zeros(size), low, high, np.full(size, LARGEST_STEP), MOST_STEPS)
    return top.value, np.append(start[:size] + top.point * errors[:size], [] if q is None else [q])


def by_differences(value_at: Callable[[FloatArray], float], u: FloatArray) -> Evaluation:
    """Value, slopes and second derivatives by central differences."""
    size = u.size
    step = DIFFERENCE * np.eye(size)
    value = value_at(u)
    up = np.array([value_at(u + step[i]) for i in range(size)])
    down = np.array([value_at(u - step[i]) for i in range(size)])
    hessian = np.diag(up + down - 2.0 * value)
    for i in range(size):
        for j in range(i):
            both = value_at(u + step[i] + step[j]) - up[i] - up[j] + value
            hessian[i, j] = hessian[j, i] = both
    return value, (up - down) / (2.0 * DIFFERENCE), hessian / DIFFERENCE**2


def _largest_gap(
    lifetimes: Lifetimes, straight: FloatArray, bent: FloatArray, log_reference: float
) -> tuple[float, float]:
    failed = lifetimes.durations[lifetimes.observed]
    logs = np.linspace(math.log(float(failed.min())), math.log(float(failed.max())), 200)
    curves = [
        np.exp(log_survival_of((logs - log_reference - point[0]) / math.exp(point[1]), float(point[2])))
        for point in (straight, bent)
    ]
    gaps = np.abs(curves[0] - curves[1])
    place = int(np.argmax(gaps))
    return float(gaps[place]), float(math.exp(logs[place]))
