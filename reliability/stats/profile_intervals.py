"""Intervals for quantities of a two-parameter life distribution: likelihood ratio (profile) and Wald."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Any, Protocol

import numpy as np
from scipy import special

from reliability.stats.errors import InvalidArgument, NotConverged
from reliability.stats.lifetimes import FloatArray
from reliability.stats.newton import EvaluatePlane, maximise_line

METHODS = ("likelihood-ratio", "wald", "wald-plain")
# a quantity whose logarithm may move this far without the likelihood falling enough is called unbounded
FARTHEST = 50.0
# this near the limit (as a share of z) one more Newton step squares the error, and needs no further maximum
NEAR_LIMIT = 1e-3
MOST_JOINT_STEPS, JOINT_ENOUGH = 10, 3e-4


@dataclass(frozen=True)
class Interval:
    """A confidence interval of one quantity, with the estimate.

    lower_unbounded, upper_unbounded: the records do not bound the quantity on that side; the limit is then the end of
    its range (0, inf, or 1 for a survival).
    """

    quantity: Any
    estimate: float
    lower: float
    upper: float
    confidence_level: float
    method: str
    lower_unbounded: bool = False
    upper_unbounded: bool = False

    def __iter__(self) -> Iterator[float]:
        """The two limits, for `low, high = fit.interval(...)`."""
        return iter((self.lower, self.upper))


# on a curve: x, y; dx, dy and their second derivatives along the free parameter; dx, dy as psi moves, and how dy along
# the free parameter changes with psi (dx never does)
CurvePoint = tuple[float, float, float, float, float, float, float, float, float]


class Curve(Protocol):
    """All parameter points (x, y) that give one value of a quantity, walked by a free parameter.

    The value is psi, the quantity on a scale without ends (its log; log(-log S) for a survival).
    """

    @property
    def free_limits(self) -> tuple[float, float]: ...

    def value_of(self, x: float, y: float) -> float: ...

    def gradient_of(self, x: float, y: float) -> tuple[float, float]: ...

    def free_of(self, x: float, y: float) -> float: ...

    def at(self, psi: float, free: float) -> CurvePoint: ...


@dataclass(frozen=True)
class Scale:
    """How psi is turned back into the quantity (and its slope); falling where a larger psi is a smaller quantity."""

    back: Callable[[float], float]
    slope: Callable[[float], float]
    lowest: float
    highest: float
    falling: bool = False


def _capped_exp(psi: float) -> float:
    return math.exp(min(psi, 709.0))


LOG = Scale(back=_capped_exp, slope=_capped_exp, lowest=0.0, highest=math.inf)
LOG_LOG_SURVIVAL = Scale(
    back=lambda psi: math.exp(-_capped_exp(psi)),
    slope=lambda psi: math.exp(psi - _capped_exp(psi)) if psi < 700.0 else 0.0,
    lowest=0.0,
    highest=1.0,
    falling=True,
)


def normal_quantile(confidence_level: float) -> float:
    """z of a two-sided level; its square is the chi-square quantile with one degree of freedom."""
    if not 0.0 < confidence_level < 1.0:
        raise InvalidArgument(f"The confidence level is {confidence_level:g}; it must lie between 0 and 1.")
    return float(special.ndtri(0.5 + confidence_level / 2.0))


def quantity_interval(
    evaluate: EvaluatePlane,
    best: tuple[float, float],
    covariance: FloatArray,
    curve: Curve,
    scale: Scale,
    quantity: Any,
    confidence_level: float,
    method: str,
    range_of_psi: tuple[float, float] | None = None,
) -> Interval:
    """Interval of the quantity behind `curve` around the estimate `best` (x, y); covariance (2, 2)."""
    z = normal_quantile(confidence_level)
    if method not in METHODS:
        raise InvalidArgument(f"The method {method!r} is not known. Choose one of {', '.join(METHODS)}.")
    centre = curve.value_of(*best)
    gradient = np.array(curve.gradient_of(*best))
    error = float(np.sqrt(max(float(gradient @ covariance @ gradient), 0.0)))
    estimate = scale.back(centre)
    if method == "wald-plain":
        half = z * error * scale.slope(centre)
        low, high = max(scale.lowest, estimate - half), min(scale.highest, estimate + half)
        return Interval(quantity, estimate, low, high, confidence_level, method)
    if method == "wald":
        ends = [(centre - z * error, False), (centre + z * error, False)]
    else:
        # far from the records log(-log S) itself is large, and its limits lie as far again
        reach = FARTHEST + (3.0 * abs(centre) if scale.falling else 0.0)
        lowest, highest = range_of_psi or (centre - reach, centre + reach)
        peak = evaluate(*best)[0]
        drift = _drift(curve, gradient, covariance, error)

        def profile(psi: float, free: float) -> tuple[float, float, float]:
            return profile_maximum(evaluate, curve, psi, free)

        free = curve.free_of(*best)
        ends = [
            limit_by_joint_steps(evaluate, curve, free, peak, z, centre, error, drift, direction, farthest)
            or profile_limit(profile, free, peak, z, centre, max(error, 1e-6), drift, direction, farthest)
            for direction, farthest in ((-1.0, lowest), (1.0, highest))
        ]
    return interval_between(ends[0], ends[1], estimate, scale, quantity, confidence_level, method)


def interval_between(
    low_end: tuple[float, bool],
    high_end: tuple[float, bool],
    estimate: float,
    scale: Scale,
    quantity: Any,
    confidence_level: float,
    method: str,
) -> Interval:
    """The interval whose ends in psi are given, each with whether it is open."""
    (low, low_open), (high, high_open) = (high_end, low_end) if scale.falling else (low_end, high_end)
    return Interval(
        quantity,
        estimate,
        scale.lowest if low_open else scale.back(low),
        scale.highest if high_open else scale.back(high),
        confidence_level,
        method,
        low_open,
        high_open,
    )


def _drift(curve: Curve, gradient: FloatArray, covariance: FloatArray, error: float) -> float:
    """How fast the free parameter moves with psi along the profile, at the estimate."""
    base = curve.free_of(0.0, 0.0)
    direction = np.array([curve.free_of(1.0, 0.0) - base, curve.free_of(0.0, 1.0) - base])
    return float(direction @ covariance @ gradient) / error**2 if error > 0.0 else 0.0


def limit_by_joint_steps(
    evaluate: EvaluatePlane,
    curve: Curve,
    free: float,
    peak: float,
    z: float,
    centre: float,
    error: float,
    drift: float,
    direction: float,
    farthest: float,
) -> tuple[float, bool] | None:
    """The limit of `profile_limit` by Newton steps in psi and the free parameter at once; None where that is not safe.

    Solves root of twice the fall = z and slope along the curve = 0 together, which needs a third of the evaluations.
    Whatever is unusual (a flat or open side, a step that leaves the neighbourhood, no top along the curve) is left to
    the guarded search. Venzon & Moolgavkar, Applied Statistics 37 (1988) 87-94.
    """
    low, high = curve.free_limits
    if not (low < high and 0.0 < error < 1.0):
        return None
    psi = centre + direction * z * error
    free += drift * direction * z * error
    for _ in range(MOST_JOINT_STEPS):
        if not (low < free < high and direction * (farthest - psi) > 0.0 and direction * (psi - centre) > 0.0):
            return None
        x, y, dx, dy, ddx, ddy, px, py, pdy = curve.at(psi, free)
        value, by_x, by_y, xx, xy, yy = evaluate(x, y)
        fall = math.sqrt(max(2.0 * (peak - value), 0.0)) if math.isfinite(value) else math.inf
        along = by_x * dx + by_y * dy
        bend = xx * dx * dx + 2.0 * xy * dx * dy + yy * dy * dy + by_x * ddx + by_y * ddy
        outward = by_x * px + by_y * py
        if not (0.3 * z < fall < 4.0 * z and bend < 0.0 and direction * outward < 0.0):
            return None
        across = xx * px * dx + xy * (px * dy + py * dx) + yy * py * dy + by_y * pdy
        # (fall - z) fall = outward d_psi + along d_free, up to the sign; and 0 = along + across d_psi + bend d_free
        determinant = outward * bend - along * across
        aim = (fall - z) * fall
        psi_step = (aim * bend + along * along) / determinant
        free_step = -(along + across * psi_step) / bend
        if not (abs(psi_step) < 2.0 * z * error and math.isfinite(free_step)):
            return None
        psi, free = psi + psi_step, free + free_step
        # the square of what is left after this step is beyond the digits that anybody reads
        if abs(psi_step) < JOINT_ENOUGH * z * error and free_step * free_step * -bend < JOINT_ENOUGH**2:
            return (psi, False) if direction * (farthest - psi) > 0.0 else None
    return None


# psi and a guess at the free parameters -> greatest log-likelihood there, its slope in psi, the free parameters
Profile = Callable[[float, Any], tuple[float, float, Any]]


def profile_limit(
    profile: Profile,
    free: Any,
    peak: float,
    z: float,
    centre: float,
    error: float,
    drift: Any,
    direction: float,
    farthest: float,
) -> tuple[float, bool]:
    """The psi beyond `centre` where twice the fall of the profile log-likelihood is z squared; True if there is none.

    free: the other parameters at the estimate, a number or an array; drift: how fast they move with psi.
    The signed root of that fall is nearly straight in psi, so Newton steps on it need few profile maxima; a bracket
    guards them. Lawless, Statistical Models and Methods for Lifetime Data (2003), section 4.1 and appendix C.
    """
    inside, outside = centre, None
    psi = centre + direction * min(z * error, 3.0)
    for _ in range(200):
        if direction * (psi - farthest) > 0:
            psi = farthest
        height, slope, new_free = profile(psi, free + drift * (psi - inside))
        fall = math.sqrt(max(2.0 * (peak - height), 0.0)) if math.isfinite(height) else math.inf
        if fall < z and psi == farthest:
            return psi, True
        near = abs(fall - z) < NEAR_LIMIT * z
        if fall < z:
            drift = (new_free - free) / (psi - inside) if psi != inside else drift
            inside, free = psi, new_free
        else:
            outside = psi
        if outside is not None and abs(outside - inside) <= 1e-12 * max(1.0, abs(inside)):
            return inside, False
        last, psi = psi, _next_psi(psi, fall, z, slope, direction, centre, inside, outside)
        if near and abs(psi - last) < 5.0 * NEAR_LIMIT * abs(last - centre):
            return psi, False
    raise NotConverged("The likelihood-ratio limit was not found in 200 steps. Use the Wald interval.", iterations=200)


def _next_psi(
    psi: float,
    fall: float,
    z: float,
    slope: float,
    direction: float,
    centre: float,
    inside: float,
    outside: float | None,
) -> float:
    """A Newton step on the root of the fall; half way where that leaves the bracket or the fall is far too deep."""
    climb = -slope * direction  # how fast half the square of the fall grows outward
    usable = 0.0 < fall < 4.0 * z and climb > 0.0
    guess = psi + direction * (z - fall) * fall / climb if usable else math.nan
    if outside is None:
        reach = inside + direction * 2.0 * max(abs(inside - centre), 1e-6)
        return reach if not direction * (guess - inside) > 0 or direction * (guess - reach) > 0 else guess
    low, high = min(inside, outside), max(inside, outside)
    return guess if low < guess < high else 0.5 * (inside + outside)


def profile_maximum(evaluate: EvaluatePlane, curve: Curve, psi: float, free: float) -> tuple[float, float, float]:
    """Largest log-likelihood with the quantity held at psi: value, its slope in psi, the free parameter there."""
    slopes: dict[float, float] = {}

    def along(free: float) -> tuple[float, float, float]:
        x, y, dx, dy, ddx, ddy, px, py, _ = curve.at(psi, free)
        value, by_x, by_y, xx, xy, yy = evaluate(x, y)
        slopes[free] = by_x * px + by_y * py
        bend = xx * dx * dx + 2.0 * xy * dx * dy + yy * dy * dy + by_x * ddx + by_y * ddy
        return value, by_x * dx + by_y * dy, bend

    low, high = curve.free_limits
    where, height = maximise_line(along, free, low, high, 1.5)
    return height, slopes[where], where
