"""Kaplan–Meier survival curve with delayed entry and weights."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from reliability.stats.errors import InvalidArgument, UndefinedEstimate, UnsupportedRows
from reliability.stats.lifetimes import FloatArray, Lifetimes
from reliability.stats.profile_intervals import normal_quantile
from reliability.stats.ranks import as_whole, ranked

BANDS = ("log-log", "log", "plain")
# a survival of 0.7 reached by products may be stored as 0.7000000000000001 and must still count as 0.7
ROUNDING = 1e-10


@dataclass(frozen=True)
class StepQuantile:
    """An age read off a step curve, same unit as the durations.

    estimate: None where the curve does not come down to it ("not reached")
    lower, upper: limits by inversion of the band. Where the upper band does not come down, upper is inf; where the
    lower band does not come down either, lower is the last age observed and the quantile lies beyond it.
    """

    probability: float
    estimate: float | None
    lower: float
    upper: float
    confidence_level: float
    reached: bool
    lower_reached: bool
    upper_reached: bool


@dataclass(frozen=True)
class RestrictedMean:
    """Mean age reached by the horizon, E[min(T, horizon)], with its variance and a normal interval."""

    estimate: float
    variance: float
    lower: float
    upper: float
    horizon: float
    confidence_level: float

    @property
    def standard_error(self) -> float:
        return float(np.sqrt(self.variance))


@dataclass(frozen=True, eq=False)
class KaplanMeierCurve:
    """Product-limit estimate: one entry for each distinct failure age, shape (k,), in rising order.

    survival is S just after the age; at_risk counts the lives with entry < age <= duration; standard_error is
    Greenwood's. given_survival_to is 0 for a curve from new. After the last step the curve stays level up to last_age.
    """

    times: FloatArray
    survival: FloatArray
    lower: FloatArray
    upper: FloatArray
    standard_error: FloatArray
    at_risk: FloatArray
    failures: FloatArray
    confidence_level: float
    band: str
    given_survival_to: float
    last_age: float

    def survival_at(self, ages: ArrayLike) -> FloatArray:
        """S at the ages, shape as given. Raises InvalidArgument outside [given_survival_to, last_age]."""
        return self._step(self.survival, ages)

    def band_at(self, ages: ArrayLike) -> tuple[FloatArray, FloatArray]:
        """Lower and upper limit of S at the ages, shapes as given."""
        return self._step(self.lower, ages), self._step(self.upper, ages)

    def at_risk_at(self, ages: ArrayLike) -> FloatArray:
        """Number at risk at the next failure at or after each age; 0 beyond the last failure."""
        return np.append(self.at_risk, 0.0)[np.searchsorted(self.times, np.asarray(ages, dtype=float), side="left")]

    def _step(self, levels: FloatArray, ages: ArrayLike) -> FloatArray:
        ages = np.asarray(ages, dtype=float)
        ended = self.survival.size > 0 and self.survival[-1] == 0.0
        outside = ~(ages >= self.given_survival_to) | (~ended & (ages > self.last_age))
        if outside.any():
            raise InvalidArgument(
                f"The curve is known from age {self.given_survival_to:g} to {self.last_age:g}; "
                f"age {ages[outside].ravel()[0]:g} lies outside."
            )
        return np.append(1.0, levels)[np.searchsorted(self.times, ages, side="right")]

    def quantile(self, probability: float) -> StepQuantile:
        """The age by which a share `probability` has failed: the first age with S <= 1 - probability.

        Interval: the ages whose band contains 1 - probability (Brookmeyer & Crowley 1982). Not reached: estimate None.
        """
        if not 0.0 < probability < 1.0:
            raise InvalidArgument(f"The share failed is {probability:g}; it must lie between 0 and 1.")
        level = 1.0 - probability
        estimate = self._first_at_or_below(self.survival, level)
        lower = self._first_at_or_below(self.lower, level)
        upper = self._first_at_or_below(self.upper, level)
        return StepQuantile(
            probability=probability,
            estimate=estimate,
            lower=self.last_age if lower is None else lower,
            upper=np.inf if upper is None else upper,
            confidence_level=self.confidence_level,
            reached=estimate is not None,
            lower_reached=lower is not None,
            upper_reached=upper is not None,
        )

    @property
    def median(self) -> StepQuantile:
        return self.quantile(0.5)

    def _first_at_or_below(self, levels: FloatArray, level: float) -> float | None:
        below = levels <= level + ROUNDING
        return float(self.times[np.argmax(below)]) if below.any() else None

    def restricted_mean(self, horizon: float) -> RestrictedMean:
        """Area under S up to the horizon (plus given_survival_to), with variance
        sum over failure ages t <= horizon of [area from t to horizon]^2 d / (n (n - d)).

        Klein & Moeschberger, Survival Analysis (2003), section 4.5. Raises InvalidArgument where the horizon lies
        beyond the last age observed while some are still running.
        """
        if not (np.isfinite(horizon) and horizon > self.given_survival_to):
            raise InvalidArgument(
                f"The horizon is {horizon:g}; the curve starts at {self.given_survival_to:g}. Choose a later one."
            )
        self.survival_at(horizon)
        inside = self.times <= horizon
        edges = np.concatenate([[self.given_survival_to], self.times[inside], [horizon]])
        areas = np.append(1.0, self.survival[inside]) * np.diff(edges)
        to_the_right = np.cumsum(areas[::-1])[::-1][1:]
        variance = float(to_the_right**2 @ greenwood_terms(self.failures[inside], self.at_risk[inside]))
        estimate = self.given_survival_to + float(areas.sum())
        half = normal_quantile(self.confidence_level) * np.sqrt(variance)
        return RestrictedMean(
            estimate=estimate,
            variance=variance,
            lower=max(self.given_survival_to, float(estimate - half)),
            upper=min(float(horizon), float(estimate + half)),
            horizon=float(horizon),
            confidence_level=self.confidence_level,
        )


def kaplan_meier(
    lifetimes: Lifetimes,
    confidence_level: float = 0.95,
    band: str = "log-log",
    *,
    minimum_at_risk: float = 0,
    given_survival_to: float | None = None,
) -> KaplanMeierCurve:
    """Survival S(t) = product over failure ages t_j <= t of (1 - d_j / n_j), n_j = lives with entry < t_j <= duration.

    Variance S^2 sum d / (n (n - d)) (Greenwood). Bands: "log-log" on log(-log S), "log" on log S, "plain" on S.
    Where S is 0 Greenwood's formula ends: the error is given as 0, the lower limit 0 and the upper limit stays.

    minimum_at_risk: with delayed entry, start at the first age with that many at risk, and speak of survival given
    that age (5 is sensible; 0 gives the textbook curve, which a tiny early risk set can send to zero for good).
    given_survival_to: start at this age instead.

    Kaplan & Meier, JASA 53 (1958) 457-481; delayed entry: Klein & Moeschberger (2003), section 4.6.
    Raises UnsupportedRows for interval rows, UndefinedEstimate where so many are never at risk, InvalidArgument.
    """
    if lifetimes.has_intervals:
        raise UnsupportedRows(
            f"{int(lifetimes.is_interval.sum())} rows failed somewhere between two ages. Use turnbull for these lives."
        )
    z = normal_quantile(confidence_level)
    if band not in BANDS:
        raise InvalidArgument(f"The band {band!r} is not known. Choose one of {', '.join(BANDS)}.")
    start = delayed_start(lifetimes, minimum_at_risk, given_survival_to)
    times, failures = _tally(lifetimes.durations[lifetimes.observed], lifetimes.weights[lifetimes.observed])
    kept = times > start
    times, failures = times[kept], failures[kept]
    at_risk = number_at_risk(lifetimes, times)
    survival = np.cumprod(np.maximum(1.0 - failures / at_risk, 0.0))
    spread = np.cumsum(greenwood_terms(failures, at_risk))  # Greenwood's sum: the variance of log S
    lower, upper = _band(survival, spread, z, band)
    return KaplanMeierCurve(
        times=times,
        survival=survival,
        lower=lower,
        upper=upper,
        standard_error=survival * np.sqrt(spread),
        at_risk=at_risk,
        failures=failures,
        confidence_level=confidence_level,
        band=band,
        given_survival_to=start,
        last_age=float(lifetimes.durations.max()),
    )


def number_at_risk(lifetimes: Lifetimes, ages: ArrayLike) -> FloatArray:
    """Lives with entry < age <= duration at each age (weighted), shape as the ages."""
    ages = np.asarray(ages, dtype=float)
    at_risk = _weight_from(lifetimes.durations, lifetimes.weights, ages)
    if lifetimes.has_entries:
        at_risk = at_risk - _weight_from(lifetimes.entries, lifetimes.weights, ages)
    return at_risk


def _weight_from(values: FloatArray, weights: FloatArray, ages: FloatArray) -> FloatArray:
    """Sum of the weights of the values >= age, at each age."""
    if weights.strides == (0,):
        return (values.size - np.searchsorted(np.sort(values), ages, side="left")) * float(weights[0])
    distinct, sums = _tally(values, weights)
    from_here = np.append(np.cumsum(sums[::-1])[::-1], 0.0)
    return from_here[np.searchsorted(distinct, ages, side="left")]


def _tally(values: FloatArray, weights: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Distinct values in rising order and the sum of the weights at each."""
    whole = as_whole(values) if values.size else None
    if whole is None:
        distinct, inverse = np.unique(values, return_inverse=True)
    else:
        found, inverse = ranked(whole)
        distinct = found.astype(np.float64)
    if weights.strides == (0,):
        return distinct, np.bincount(inverse, minlength=distinct.size) * (float(weights[0]) if weights.size else 1.0)
    return distinct, np.bincount(inverse, weights=weights, minlength=distinct.size)


def delayed_start(lifetimes: Lifetimes, minimum_at_risk: float, given_survival_to: float | None) -> float:
    """The age at which a curve with late entry begins: as given, else the first with enough at risk."""
    start = _first_with_enough(lifetimes, minimum_at_risk) if given_survival_to is None else float(given_survival_to)
    last_age = float(lifetimes.durations.max())
    if not 0.0 <= start < last_age:
        raise InvalidArgument(f"The start at age {start:g} is not between 0 and the last age observed, {last_age:g}.")
    return start


def _first_with_enough(lifetimes: Lifetimes, minimum_at_risk: float) -> float:
    if minimum_at_risk <= 0 or not lifetimes.has_entries:
        return 0.0
    entries, entered = _tally(lifetimes.entries, lifetimes.weights)
    gone = lifetimes.count - _weight_from(lifetimes.durations, lifetimes.weights, np.nextafter(entries, np.inf))
    under_observation = np.cumsum(entered) - gone
    enough = under_observation >= minimum_at_risk - ROUNDING
    if not enough.any():
        raise UndefinedEstimate(
            f"At no age are {minimum_at_risk:g} lives under observation at once (at most {under_observation.max():g}). "
            "Ask for fewer, or wait for more records."
        )
    return float(entries[np.argmax(enough)])


def greenwood_terms(failures: FloatArray, at_risk: FloatArray) -> FloatArray:
    """Greenwood's terms d / (n (n - d)); 0 where all at risk fail, because nothing is left to vary."""
    left = at_risk - failures
    all_fail = left <= ROUNDING * at_risk
    return np.where(all_fail, 0.0, failures / (at_risk * np.where(all_fail, 1.0, left)))


def _band(survival: FloatArray, spread: FloatArray, z: float, band: str) -> tuple[FloatArray, FloatArray]:
    lower, upper = np.zeros_like(survival), np.zeros_like(survival)
    inside = survival > 0.0  # rows before the curve ends at zero, if it does
    s, error = survival[inside], np.sqrt(spread[inside])
    if band == "log-log":
        stretch = np.exp(np.minimum(z * error / -np.log(s), 700.0))  # capped: weights far below 1 would overflow
        lower[inside], upper[inside] = s**stretch, s ** (1.0 / stretch)
    elif band == "log":
        lower[inside], upper[inside] = s * np.exp(-z * error), np.minimum(1.0, s * np.exp(z * error))
    else:
        lower[inside], upper[inside] = np.maximum(0.0, s - z * s * error), np.minimum(1.0, s + z * s * error)
    if not inside.all():
        upper[~inside] = upper[inside][-1] if inside.any() else 1.0
    return lower, upper
