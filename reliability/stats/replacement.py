"""Age replacement: at which age a working part is best replaced as planned, so that the long run costs least.

A part is replaced when it fails, at the failure's cost, or at the age T, at the cost of a planned replacement. Each
replacement renews the position, so the long-run cost for each unit of time is cost over length of one cycle,

    g(T) = [planned S(T) + failure F(T)] / int_0^T S(u) du,   g(inf) = failure / mean life.

Sources: Barlow & Proschan 1965, Mathematical Theory of Reliability, ch. 4.2; Barlow & Hunter 1960, Operations Research
8, 90. Visits only: see `replacement_visits`. What records leave open: see `replacement_posterior`.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from math import exp, inf, isfinite, lgamma

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import gammainc, gammaln

from reliability.stats.errors import InvalidArgument
from reliability.stats.replacement_posterior import ReplacementCosts, replacement_costs
from reliability.stats.replacement_visits import best_visit_age, check_costs

FloatArray = NDArray[np.float64]

__all__ = ["BestAge", "ReplacementCosts", "best_age_of_life", "best_replacement_age", "cost_rates", "replacement_costs"]

_HALVINGS = 200
_LOG_Z = 700.0  # exp of it is the largest that floats hold


@dataclass(frozen=True)
class BestAge:
    """`age` inf: planned replacement cannot pay. Cost rates for each unit of time; `never` is that of failures alone.

    With visits, `age` is the least age from which a part is replaced at the next visit.
    """

    age: float
    cost_rate: float
    never: float

    @property
    def pays(self) -> bool:
        """Whether any planned age costs less than waiting for failures."""
        return isfinite(self.age)

    @property
    def saving(self) -> float:
        """Share of the cost of failures alone that the planned age saves, 0 to 1."""
        return 1.0 - self.cost_rate / self.never


def best_replacement_age(
    shape: float,
    scale: float,
    planned_cost: float,
    failure_cost: float,
    *,
    visit_interval: float | None = None,
) -> BestAge:
    """The age with the least cost rate of Weibull lives, S(t) = exp(-(t / scale)^shape).

    shape, scale, costs: above 0; age in the unit of scale, cost rate in the costs' unit for each unit of scale.
    For shape > 1 and failure_cost > planned_cost the one age with hazard(T) int_0^T S - F(T) = planned / (failure -
    planned); otherwise the hazard never earns a planned replacement back, and the age is inf.
    visit_interval: parts are replaced as planned only at visits so far apart, failures whenever they happen; the age is
    then found to within a sixteenth of the interval.
    Raises InvalidArgument. Source: Barlow & Proschan 1965, ch. 4.2, theorem 2.1.
    """
    _check_life(shape, scale)
    check_costs(planned_cost, failure_cost)
    never = failure_cost / scale * exp(-lgamma(1.0 + 1.0 / shape))
    if not (isfinite(never) and never > 0):
        raise InvalidArgument(
            f"A Weibull life of shape {shape:g} and scale {scale:g} has no mean that a computer can hold, so no cost "
            "rate either."
        )
    if shape <= 1.0 or planned_cost >= failure_cost:
        return BestAge(inf, never, never)
    ages, rates = _continuous(np.array([shape]), np.array([scale]), planned_cost, failure_cost)
    age, rate = float(ages[0]), float(rates[0])
    if not isfinite(age) or not rate < never:
        return BestAge(inf, never, never)
    if visit_interval is None:
        return BestAge(age, rate, never)
    if not (isfinite(visit_interval) and visit_interval > 0):
        raise InvalidArgument(f"visit_interval is {visit_interval:g}; it must be above 0.")
    at, at_rate = best_visit_age(shape, scale, planned_cost, failure_cost, visit_interval, age)
    return BestAge(at, at_rate, never) if at_rate < never else BestAge(inf, never, never)


def cost_rates(shape: float, scale: float, planned_cost: float, failure_cost: float, ages: ArrayLike) -> FloatArray:
    """g(T) of Weibull lives at `ages` (any shape, above 0; inf: failures alone). Raises InvalidArgument."""
    _check_life(shape, scale)
    check_costs(planned_cost, failure_cost)
    asked = np.asarray(ages, dtype=np.float64)
    if not (asked > 0).all():
        raise InvalidArgument("ages must be above 0.")
    with np.errstate(over="ignore"):
        return _rates(np.log(asked / scale) * shape, shape, scale, planned_cost, failure_cost)


def best_age_of_life(
    survival: Callable[[FloatArray], FloatArray], longest: float, planned_cost: float, failure_cost: float
) -> BestAge:
    """The same for any life that ends by the age `longest`: `survival` maps ages (n,) to shares still working.

    The best of 4,096 equal steps, refined by halving the step around it; integrals by Simpson's rule, within 1e-8 for
    smooth lives. Raises InvalidArgument where survival does not fall from 1 or costs are out of range.
    """
    check_costs(planned_cost, failure_cost)
    if not (isfinite(longest) and longest > 0):
        raise InvalidArgument(f"longest is {longest:g}; it must be above 0.")
    low, high = 0.0, float(longest)
    before = 0.0
    rate = never = inf
    age = high
    for step in range(6):
        ages = np.linspace(low, high, 4097)
        alive = np.asarray(survival(ages), dtype=np.float64)
        if not (np.diff(alive) <= 1e-12).all() or (step == 0 and abs(alive[0] - 1.0) > 1e-9):
            raise InvalidArgument("survival must begin with 1 at age 0 and never rise.")
        middle = np.asarray(survival((ages[:-1] + ages[1:]) / 2.0), dtype=np.float64)
        steps = (alive[:-1] + 4.0 * middle + alive[1:]) * np.diff(ages) / 6.0
        lived = before + np.concatenate([[0.0], np.cumsum(steps)])
        with np.errstate(divide="ignore"):
            found = (failure_cost - (failure_cost - planned_cost) * alive) / lived
        if step == 0:
            never = float(failure_cost / lived[-1])
        best = int(np.argmin(found))
        age, rate = float(ages[best]), float(found[best])
        first, last = max(best - 1, 0), min(best + 1, ages.size - 1)
        low, high, before = float(ages[first]), float(ages[last]), float(lived[first])
    return BestAge(age, rate, never) if rate < never * (1.0 - 1e-9) else BestAge(inf, never, never)


def _continuous(
    shape: FloatArray, scale: FloatArray, planned_cost: float, failure_cost: float
) -> tuple[FloatArray, FloatArray]:
    """Best ages and their cost rates, (n,), by halving on the log of the cumulative hazard z = (T / scale)^shape."""
    wanted = planned_cost / (failure_cost - planned_cost)
    low, high = np.full(shape.shape, -_LOG_Z), np.full(shape.shape, _LOG_Z)
    for _ in range(_HALVINGS):
        middle = (low + high) / 2.0
        below = _gain(middle, shape) < wanted
        low, high = np.where(below, middle, low), np.where(below, high, middle)
    logs = (low + high) / 2.0
    with np.errstate(over="ignore"):
        ages = np.where(high < _LOG_Z, scale * np.exp(logs / shape), inf)
    return ages, _rates(logs, shape, scale, planned_cost, failure_cost)


def _gain(logs: FloatArray, shape: FloatArray) -> FloatArray:
    """hazard(T) int_0^T S - F(T) at z = exp(logs): 0 at birth, and for shape > 1 rising without bound."""
    with np.errstate(over="ignore"):
        z = np.exp(logs)
    near = z < 1e-5
    lived = np.exp(_log_mean(shape)) * gammainc(1.0 / shape, z)
    with np.errstate(over="ignore"):
        gain = shape * np.exp(logs * (1.0 - 1.0 / shape)) * lived + np.expm1(-z)
    # the difference of two nearly equal numbers: its series instead
    small = np.minimum(z, 1.0)
    return np.where(near, small * (shape - 1.0) + small**2 * (0.5 - shape / (shape + 1.0)), gain)


def _rates(
    logs: FloatArray, shape: FloatArray | float, scale: FloatArray | float, planned_cost: float, failure_cost: float
) -> FloatArray:
    """g at z = exp(logs)."""
    with np.errstate(over="ignore"):
        z = np.exp(logs)
    lived = np.exp(_log_mean(np.asarray(shape))) * scale * gammainc(1.0 / np.asarray(shape), z)
    cost: FloatArray = planned_cost - (failure_cost - planned_cost) * np.expm1(-z)
    with np.errstate(divide="ignore", over="ignore"):
        rates: FloatArray = cost / lived
    return rates


def _log_mean(shape: FloatArray) -> FloatArray:
    """Log of the mean life at scale 1."""
    result: FloatArray = gammaln(1.0 + 1.0 / shape)
    return result


def _check_life(shape: float, scale: float) -> None:
    if not (isfinite(shape) and isfinite(scale) and shape > 0 and scale > 0):
        raise InvalidArgument(f"shape is {shape:g} and scale {scale:g}; both must be above 0.")
