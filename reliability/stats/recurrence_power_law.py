"""Power-law process: failures of repaired systems whose rate rises or falls with age, with exact intervals."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy import optimize, special

from reliability.stats.errors import InvalidArgument, TooFewFailures, UndefinedEstimate
from reliability.stats.lifetimes import FloatArray
from reliability.stats.profile_intervals import Interval, normal_quantile
from reliability.stats.recurrence_histories import Histories

QUANTITIES = ("shape", "mtbf")


@dataclass(frozen=True, eq=False)
class PowerLawFit:
    """Failures of one system up to age t: Poisson with mean (t / scale)^shape = rate t^shape.

    shape (beta) above 1: failures come ever faster; below 1: ever slower. systems and failures are counts; end is the
    common end of observation, None where the systems end at different ages (the mtbf is then not defined by one age).
    """

    shape: float
    scale: float
    rate: float
    log_likelihood: float
    failures: int
    systems: int
    truncated: str
    end: float | None
    log_sum: float  # sum of log(end / age) over the failures
    free_failures: int  # failures whose ages vary: all, or all but the last of each system
    log_shape_error: float  # standard error of log shape, from the curvature of the likelihood

    def intensity(self, age: float) -> float:
        """Failures of one system in a unit of time at the age."""
        if not age > 0.0:
            raise InvalidArgument(f"The age is {age:g}; it must be above 0.")
        return self.shape * self.rate * age ** (self.shape - 1.0)

    @property
    def unbiased_shape(self) -> float:
        """(N - 1) / sum log(T / t) by time, (N - k - 1) / the same by failure: the estimate without its bias.

        Crow, in Reliability and Biometry (SIAM, 1974) 379-410.
        """
        if self.free_failures < 2:
            raise TooFewFailures(
                f"{self.failures} failures are too few for an unbiased shape. Wait for more failures.",
                failures=self.failures,
                needed=self.failures + 1,
            )
        return (self.free_failures - 1) / self.log_sum

    @property
    def mtbf(self) -> float:
        """Mean time between failures of one system at the end of observation, 1 / intensity(end)."""
        return 1.0 / self.intensity(self._common_end())

    @property
    def unbiased_mtbf(self) -> float:
        """The same with the unbiased shape, as printed in the NIST/SEMATECH e-Handbook, 8.4.5.2."""
        return self._common_end() * self.systems / (self.failures * self.unbiased_shape)

    def interval(self, quantity: str, confidence_level: float = 0.95, method: str = "exact") -> Interval:
        """Interval of "shape" or "mtbf" (at the end of observation).

        "exact": for the shape from 2 beta sum log(T / t) ~ chi-square with 2 N degrees of freedom given N (by failure
        2 (N - k)), which holds for systems with different ends and rates. For the mtbf by time: N given that sum has
        chances in proportion to mu^n / (n! (n - 1)!), mu = sum x systems T / mtbf; by failure: the mtbf's estimate
        over the truth is a product of two independent gamma variables over N^2 (one system).
        "wald": symmetric on the log, shape only, also for systems watched from a later age.
        Crow, Technometrics 24 (1982) 67-72; Lee & Lee, Technometrics 20 (1978) 195-199.
        """
        tail = 0.5 * (1.0 - confidence_level)
        z = normal_quantile(confidence_level)
        if quantity not in QUANTITIES:
            raise InvalidArgument(f"The quantity {quantity!r} is not known. Choose one of {', '.join(QUANTITIES)}.")
        if method == "wald" and quantity == "shape":
            factor = math.exp(z * self.log_shape_error)
            return Interval(quantity, self.shape, self.shape / factor, self.shape * factor, confidence_level, method)
        if method != "exact":
            raise InvalidArgument(f"The method {method!r} is not known for {quantity}. Use exact.")
        if math.isnan(self.log_sum):
            raise UndefinedEstimate("The exact interval needs systems watched from new. Use wald, for the shape.")
        if quantity == "shape":
            low, high = special.gammaincinv(self.free_failures, [tail, 1.0 - tail]) / self.log_sum
        elif self.truncated == "time":
            low, high = self._mtbf_by_time(tail)
        else:
            low, high = self._mtbf_by_failure(tail)
        estimate = getattr(self, quantity)
        return Interval(
            quantity, estimate, float(low), float(high), confidence_level, method, upper_unbounded=math.isinf(high)
        )

    def _common_end(self) -> float:
        if self.end is None:
            raise UndefinedEstimate(
                "The systems end at different ages, so there is no one age for the mean time between failures. "
                "Ask for intensity(age)."
            )
        return self.end

    def _mtbf_by_time(self, tail: float) -> tuple[float, float]:
        end = self._common_end()

        def least(mean: float) -> float:
            """Chance of at least this many failures given the log sum."""
            return 1.0 - _share_below(self.failures, mean * self.log_sum)

        def most(mean: float) -> float:
            return _share_below(self.failures + 1, mean * self.log_sum)

        many = _root(lambda mean: tail - most(mean), self.failures * self.shape)
        lower = self.systems * end / many
        if self.failures == 1:
            # one failure was bound to be seen, given that there was any
            return lower, math.inf
        return lower, self.systems * end / _root(lambda mean: least(mean) - tail, self.failures * self.shape)

    def _mtbf_by_failure(self, tail: float) -> tuple[float, float]:
        self._common_end()
        if self.systems > 1 or self.failures < 2:
            raise UndefinedEstimate("By failure, the exact interval of the mtbf is known for one system only.")
        low, high = (_gamma_product_quantile(self.failures, share) for share in (tail, 1.0 - tail))
        return self.mtbf * self.failures**2 / high, self.mtbf * self.failures**2 / low


def fit_power_law(event_times: Any, ends: Any = None, *, truncated: str = "time", starts: Any = 0) -> PowerLawFit:
    """Maximum-likelihood power-law process of one or several systems with the same law.

    event_times: one list of failure ages, or one list a system. ends: age at which each system's observation ended,
    one number or one a system; by failure ("failure") it is each system's last failure and need not be given.
    starts: age when observation began (0 from new). With equal ends T and k systems beta = N / sum log(T / t),
    rate = N / (k T^beta); else beta solves N / beta + sum log t = N d log sum(end^beta - start^beta) / d beta.

    Crow, in Reliability and Biometry (SIAM, 1974) 379-410; Rigdon & Basu, Statistical Methods for the Reliability of
    Repairable Systems (2000), chapter 4. Raises TooFewFailures, UndefinedEstimate, InvalidArgument, InvalidHistories.
    """
    if truncated not in ("time", "failure"):
        raise InvalidArgument(f"truncated is {truncated!r}; it must be time or failure.")
    systems = _systems(event_times)
    if truncated == "failure":
        ends = _last_failures(systems)
    elif ends is None:
        raise InvalidArgument("Truncated by time needs the end of observation of each system. Give ends.")
    given = np.broadcast_to(np.asarray(ends, dtype=float), (len(systems),))
    histories = Histories(range(len(systems)), systems, starts, given)
    failures = histories.event_times.size
    free = failures if truncated == "time" else failures - len(systems)
    if free < 1:
        raise TooFewFailures(
            f"{failures} failures of {len(systems)} systems are too few for a power law. Wait for more failures.",
            failures=failures,
            needed=failures + 1,
        )
    log_ends = np.log(histories.ends[histories.event_units])
    late = bool((histories.starts > 0).any())
    log_sum = float((log_ends - np.log(histories.event_times)).sum())
    if log_sum <= 0.0:
        raise UndefinedEstimate("Every failure came at the very end of observation, so the shape has no upper limit.")
    equal = bool((histories.ends == histories.ends[0]).all()) and not late
    shape = failures / log_sum if equal else _shape_by_search(histories, failures / log_sum)
    log_mass = _log_mass(shape, histories.starts, histories.ends)[0]
    log_rate = math.log(failures) - log_mass
    if late:
        # the conditional distribution that the exact interval rests on needs histories from new
        log_sum = math.nan
    return PowerLawFit(
        shape=shape,
        scale=math.exp(-log_rate / shape),
        rate=math.exp(log_rate),
        log_likelihood=failures * (math.log(shape) + log_rate - 1.0)
        + (shape - 1.0) * float(np.log(histories.event_times).sum()),
        failures=failures,
        systems=len(systems),
        truncated=truncated,
        end=float(histories.ends[0]) if equal else None,
        log_sum=log_sum,
        free_failures=free,
        log_shape_error=_log_shape_error(histories, shape),
    )


def _systems(event_times: Any) -> list[FloatArray]:
    rows = list(event_times)
    if not rows or np.ndim(rows[0]) == 0:
        rows = [rows]
    return [np.asarray(row, dtype=float) for row in rows]


def _last_failures(systems: Sequence[FloatArray]) -> FloatArray:
    if any(times.size == 0 for times in systems):
        raise TooFewFailures(
            "A system without a failure cannot end at its last failure. Use truncated='time'.", failures=0, needed=1
        )
    return np.array([times.max() for times in systems])


def _log_mass(shape: float, starts: FloatArray, ends: FloatArray) -> tuple[float, float]:
    """log of sum(end^shape - start^shape) and its derivative in shape."""
    top = float(np.log(ends.max()))
    with np.errstate(divide="ignore", under="ignore"):
        log_ends, log_starts = np.log(ends) - top, np.log(starts) - top
        upper, lower = np.exp(shape * log_ends), np.exp(shape * log_starts)
    total = float((upper - lower).sum())
    late = starts > 0
    slope = float((upper * log_ends).sum() - (lower[late] * log_starts[late]).sum())
    return math.log(total) + shape * top, slope / total + top


def _shape_by_search(histories: Histories, guess: float) -> float:
    count, logs = histories.event_times.size, float(np.log(histories.event_times).sum())

    def slope(log_shape: float) -> float:
        shape = math.exp(log_shape)
        return count / shape + logs - count * _log_mass(shape, histories.starts, histories.ends)[1]

    low = high = math.log(guess)
    while slope(low) < 0.0:
        low -= 1.0
        if low < -30.0:
            raise UndefinedEstimate("The failures came at the very start of observation; no shape fits them best.")
    while slope(high) > 0.0:
        high += 1.0
        if high > 30.0:
            raise UndefinedEstimate("The failures came at the very end of observation; no shape fits them best.")
    return math.exp(optimize.brentq(slope, low, high, xtol=1e-13) if low < high else low)


def _log_shape_error(histories: Histories, shape: float) -> float:
    """1 / sqrt(-d2 log L / d(log shape)^2) with the rate at its best for each shape."""
    count, logs, step = histories.event_times.size, float(np.log(histories.event_times).sum()), 1e-4

    def slope(log_shape: float) -> float:
        at = math.exp(log_shape)
        return count + at * (logs - count * _log_mass(at, histories.starts, histories.ends)[1])

    centre = math.log(shape)
    return 1.0 / math.sqrt((slope(centre - step) - slope(centre + step)) / (2.0 * step))


def _share_below(count: int, product: float) -> float:
    """Chance of fewer than `count` where n >= 1 has chances in proportion to product^n / (n! (n - 1)!)."""
    # the terms are negligible well beyond the mode near sqrt(product)
    n = np.arange(1, int(2.0 * math.sqrt(product) + 12.0 * product**0.25 + count) + 60)
    logs = n * math.log(product) - special.gammaln(n + 1.0) - special.gammaln(n)
    shares = np.exp(logs - logs.max())
    return float(shares[: count - 1].sum() / shares.sum())


def _root(rising: Any, guess: float) -> float:
    low, high = guess, guess
    while rising(low) > 0.0 and low > guess * 1e-12:
        low /= 2.0
    while rising(high) < 0.0:
        high *= 2.0
    return float(optimize.brentq(rising, low, high, xtol=1e-12 * guess, rtol=1e-13))


def _gamma_product_quantile(count: int, share: float) -> float:
    """Quantile of the product of independent gamma variables with shapes `count` and `count` - 1."""
    # the trapezoid rule in the logarithm of the first variable, far into both tails
    low, high = np.log(special.gammaincinv(count, 1e-16)), np.log(special.gammainccinv(count, 1e-16))
    logs = np.linspace(low, high, 200)
    density = np.exp(count * logs - np.exp(logs) - special.gammaln(count))
    density /= density.sum()

    def excess(log_product: float) -> float:
        return float(density @ special.gammainc(count - 1, np.exp(log_product - logs))) - share

    centre = 2.0 * math.log(count)
    return math.exp(optimize.brentq(excess, centre - 60.0, centre + 20.0, xtol=1e-12))
