"""Few or no failures: lower bounds under an assumed shape, and the tests that would demonstrate more."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy import special

from reliability.stats.errors import InvalidArgument
from reliability.stats.lifetimes import Lifetimes

# from parts that do not wear to parts that wear as one
USUAL_SHAPES = (1.0, 1.5, 2.0, 2.5, 3.0, 4.0, 5.0)


@dataclass(frozen=True)
class KnownShapeBound:
    """What the records say if the shape is the assumed one. Ages carry the unit of the durations.

    scale_lower, quantile_lower, mean_lower: with the stated confidence the scale, the age by which the share
    `probability` has failed, and the mean life exceed these. scale: the estimate, None without a failure.
    """

    shape: float
    failures: float
    lives: float
    exposure: float
    confidence_level: float
    probability: float
    scale: float | None
    scale_lower: float
    quantile_lower: float
    mean_lower: float


def known_shape_bounds(
    lifetimes: Lifetimes,
    shapes: Sequence[float] = USUAL_SHAPES,
    *,
    probability: float = 0.1,
    confidence_level: float = 0.95,
) -> list[KnownShapeBound]:
    """One-sided lower bounds for each assumed shape, in the order of the shapes.

    With D failures and A = sum (t^shape - entry^shape) the scale exceeds (2 A / chi2(confidence; 2 D + 2))^(1/shape),
    so at 0 failures (A / -log(1 - confidence))^(1/shape). A failure found between two ages counts only the life up to
    the last good one, which errs on the safe side. 2 D + 2 is exact for a test ended by time with replacement and safe
    otherwise. Nelson, IEEE Trans. Reliability 34 (1985) 230-232; Meeker & Escobar (1998), section 8.8 (zero failures).
    """
    _refuse_share(probability, "share failed")
    _refuse_share(confidence_level, "confidence level")
    ends = np.where(lifetimes.is_interval, lifetimes.last_good, lifetimes.durations)
    top = math.log(float(lifetimes.durations.max()))
    failures = lifetimes.failures
    needed = float(special.gammaincinv(failures + 1.0, confidence_level))  # half the chi-square quantile
    bounds = []
    for shape in shapes:
        if not (math.isfinite(shape) and shape > 0.0):
            raise InvalidArgument(f"The shape is {shape:g}; it must be a number above 0.")
        # ages relative to the greatest, so that no power overflows
        with np.errstate(divide="ignore", under="ignore"):
            powers = [np.exp(shape * (np.log(ages) - top)) for ages in (ends, lifetimes.entries)]
        area = float(lifetimes.weights @ (powers[0] - powers[1]))
        lower = math.exp(top + math.log(area / needed) / shape) if area > 0.0 else 0.0
        bounds.append(
            KnownShapeBound(
                shape=float(shape),
                failures=failures,
                lives=lifetimes.count,
                exposure=lifetimes.exposure,
                confidence_level=confidence_level,
                probability=probability,
                scale=math.exp(top + math.log(area / failures) / shape) if failures > 0 and area > 0.0 else None,
                scale_lower=lower,
                quantile_lower=lower * (-math.log1p(-probability)) ** (1.0 / shape),
                mean_lower=lower * math.gamma(1.0 + 1.0 / shape) if shape > 0.006 else math.inf,
            )
        )
    return bounds


def success_run_size(
    reliability: float,
    confidence_level: float = 0.95,
    failures: int = 0,
    *,
    life_ratio: float = 1.0,
    shape: float = 1.0,
) -> int:
    """Smallest number of parts to test so that no more than `failures` failures demonstrate the reliability.

    Each part runs life_ratio times the life for which the reliability is claimed; under a Weibull with this shape its
    chance to survive is then reliability^(life_ratio^shape). The size is the smallest n with
    P(at most `failures` of n) <= 1 - confidence; at 0 failures log(1 - C) / (life_ratio^shape log R), rounded up.
    Meeker & Escobar (1998), section 10.6; the success-run theorem is common practice.
    """
    _refuse_share(reliability, "reliability")
    _refuse_share(confidence_level, "confidence level")
    _refuse_count(failures, 0, "allowed failures")
    if not (0.0 < life_ratio < math.inf and 0.0 < shape < math.inf):
        raise InvalidArgument(f"The life ratio is {life_ratio:g} and the shape {shape:g}; both must be above 0.")
    log_survival = life_ratio**shape * math.log(reliability)
    fails = -math.expm1(log_survival)
    if fails < 1e-12:
        raise InvalidArgument("The test is so short that no number of parts demonstrates this. Test longer.")

    def enough(size: int) -> bool:
        # rounding must not ask for one part more where the table's bound is met exactly
        return size > failures and special.bdtr(failures, size, fails) <= (1.0 - confidence_level) * (1.0 + 1e-12)

    high = failures + 1
    while not enough(high):
        high *= 2
    low = max(failures, high // 2)
    while high - low > 1:
        middle = (low + high) // 2
        low, high = (low, middle) if enough(middle) else (middle, high)
    return high


def demonstrated_reliability(size: int, failures: int, confidence_level: float = 0.95) -> float:
    """Lower confidence bound of the share that survives the test, `failures` of `size` having failed.

    Clopper & Pearson, Biometrika 26 (1934) 404-413; 0 where all failed.
    """
    _refuse_share(confidence_level, "confidence level")
    _refuse_count(size, 1, "tested parts")
    _refuse_count(failures, 0, "failures")
    if failures > size:
        raise InvalidArgument(f"{failures} of {size} tested parts cannot have failed.")
    if failures == size:
        return 0.0
    return float(special.betaincinv(size - failures, failures + 1, 1.0 - confidence_level))


def required_test_time(failures: int, confidence_level: float = 0.9) -> float:
    """Test time, in multiples of the mean life to be shown, that shows it with at most so many failures.

    Half the chi-square quantile with 2 failures + 2 degrees of freedom, for lives without wear.
    NIST/SEMATECH e-Handbook of Statistical Methods, 8.3.1.1.
    """
    _refuse_share(confidence_level, "confidence level")
    _refuse_count(failures, 0, "allowed failures")
    return float(special.gammaincinv(failures + 1.0, confidence_level))


@dataclass(frozen=True)
class FixedLengthPlan:
    """A fixed-length test of a mean life: accept with fewer than `reject_failures` failures.

    test_length is in multiples of the lower mean theta_1; discrimination_ratio = theta_0 / theta_1. producer_risk:
    rejecting parts with the mean theta_0; consumer_risk: accepting parts with the mean theta_1.
    """

    discrimination_ratio: float
    test_length: float
    reject_failures: int
    producer_risk: float
    consumer_risk: float


def fixed_length_plan(discrimination_ratio: float, test_length: float, reject_failures: int) -> FixedLengthPlan:
    """The risks of a plan, alpha = P(N >= r | T / theta_0) and beta = P(N <= r - 1 | T / theta_1), N Poisson.

    Lives without wear. MIL-HDBK-781A (1996), fixed-length plans.
    """
    if not (1.0 < discrimination_ratio < math.inf and 0.0 < test_length < math.inf):
        raise InvalidArgument(
            f"The discrimination ratio is {discrimination_ratio:g} and the length {test_length:g}; "
            "they must be above 1 and above 0."
        )
    _refuse_count(reject_failures, 1, "failures that reject")
    return FixedLengthPlan(
        discrimination_ratio=float(discrimination_ratio),
        test_length=float(test_length),
        reject_failures=int(reject_failures),
        producer_risk=float(special.gammainc(reject_failures, test_length / discrimination_ratio)),
        consumer_risk=float(special.gammaincc(reject_failures, test_length)),
    )


def shortest_fixed_length_plan(
    discrimination_ratio: float, producer_risk: float = 0.1, consumer_risk: float = 0.1
) -> FixedLengthPlan:
    """The plan with the fewest failures, and the shortest for it, that keeps both risks."""
    _refuse_share(producer_risk, "producer's risk")
    _refuse_share(consumer_risk, "consumer's risk")
    if producer_risk + consumer_risk >= 1.0:
        raise InvalidArgument("The two risks add to 1 or more: no test is needed to keep them. Ask for smaller ones.")
    if not 1.01 <= discrimination_ratio < math.inf:
        raise InvalidArgument(f"The discrimination ratio is {discrimination_ratio:g}; it must be at least 1.01.")

    def length(failures: int) -> float:
        return float(special.gammainccinv(failures, consumer_risk))

    def keeps(failures: int) -> bool:
        return special.gammainc(failures, length(failures) / discrimination_ratio) <= producer_risk

    low, high = 0, 1
    while not keeps(high):
        low, high = high, 2 * high
    while high - low > 1:
        middle = (low + high) // 2
        low, high = (low, middle) if keeps(middle) else (middle, high)
    return fixed_length_plan(discrimination_ratio, length(high), high)


def _refuse_share(value: float, name: str) -> None:
    if not 0.0 < value < 1.0:
        raise InvalidArgument(f"The {name} is {value:g}; it must lie between 0 and 1.")


def _refuse_count(value: int, least: int, name: str) -> None:
    if value != int(value) or value < least:
        raise InvalidArgument(f"The number of {name} is {value:g}; it must be a whole number of at least {least}.")
