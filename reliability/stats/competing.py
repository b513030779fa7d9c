"""Competing failure modes: how many parts really fail by each, the others acting too."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from reliability.stats.errors import InvalidArgument, UnsupportedRows
from reliability.stats.kaplan_meier import delayed_start, greenwood_terms, number_at_risk
from reliability.stats.lifetimes import FloatArray, IntArray, Lifetimes
from reliability.stats.profile_intervals import normal_quantile


@dataclass(frozen=True, eq=False)
class CumulativeIncidence:
    """Aalen–Johansen estimate: share failed by each mode, at each distinct failure age of any mode.

    times, survival, at_risk: shape (k,). incidence, lower, upper, standard_error, failures: shape (modes, k), rows in
    the order of `modes`. The rows of incidence and survival add to 1 at every age.
    """

    modes: tuple[Any, ...]
    times: FloatArray
    survival: FloatArray
    at_risk: FloatArray
    incidence: FloatArray
    lower: FloatArray
    upper: FloatArray
    standard_error: FloatArray
    failures: FloatArray
    confidence_level: float
    band: str
    given_survival_to: float
    last_age: float

    def row_of(self, mode: Any) -> int:
        """The row of a mode. Raises InvalidArgument where nothing failed by it."""
        if mode not in self.modes:
            raise InvalidArgument(f"No part failed by {mode!r}. The modes are {', '.join(map(str, self.modes))}.")
        return self.modes.index(mode)

    def incidence_at(self, mode: Any, ages: ArrayLike) -> FloatArray:
        """Share failed by the mode at the ages, shape as given. Raises InvalidArgument outside the observed ages."""
        return self._step(self.incidence[self.row_of(mode)], ages)

    def band_at(self, mode: Any, ages: ArrayLike) -> tuple[FloatArray, FloatArray]:
        """Lower and upper limit of the share failed by the mode at the ages."""
        row = self.row_of(mode)
        return self._step(self.lower[row], ages), self._step(self.upper[row], ages)

    def _step(self, levels: FloatArray, ages: ArrayLike) -> FloatArray:
        ages = np.asarray(ages, dtype=float)
        ended = self.survival.size > 0 and self.survival[-1] == 0.0
        outside = ~(ages >= self.given_survival_to) | (~ended & (ages > self.last_age))
        if outside.any():
            raise InvalidArgument(
                f"The shares are known from age {self.given_survival_to:g} to {self.last_age:g}; "
                f"age {ages[outside].ravel()[0]:g} lies outside."
            )
        return np.append(0.0, levels)[np.searchsorted(self.times, ages, side="right")]


def cumulative_incidence(
    lifetimes: Lifetimes,
    modes: ArrayLike,
    confidence_level: float = 0.95,
    *,
    minimum_at_risk: float = 0,
    given_survival_to: float | None = None,
) -> CumulativeIncidence:
    """Share failed by mode m, F_m(t) = sum over failure ages t_j <= t of S(t_j-) d_mj / n_j, S the Kaplan–Meier curve.

    modes: the mode of each row, shape (n,), read only where the row failed; any labels. Late entry and weights as in
    `kaplan_meier`, whose minimum_at_risk and given_survival_to these are. Variance by the delta method (Dinse & Larson,
    Biometrika 73 (1986) 379-386); it is Greenwood's for a single mode. Band: log(-log F).

    Aalen & Johansen, Scandinavian J. Statistics 5 (1978) 141-150. Raises UnsupportedRows for interval rows,
    InvalidArgument.
    """
    if lifetimes.has_intervals:
        raise UnsupportedRows(
            f"{int(lifetimes.is_interval.sum())} rows failed somewhere between two ages. "
            "Give their ages, or use turnbull for all modes together."
        )
    z = normal_quantile(confidence_level)
    labels, codes = _mode_codes(lifetimes, modes)
    start = delayed_start(lifetimes, minimum_at_risk, given_survival_to)
    chosen = lifetimes.observed & (lifetimes.durations > start)
    times, position = np.unique(lifetimes.durations[chosen], return_inverse=True)
    failures = np.zeros((len(labels), times.size))
    np.add.at(failures, (codes[chosen], position), lifetimes.weights[chosen])
    at_risk = number_at_risk(lifetimes, times)
    total = failures.sum(axis=0)
    survival = np.cumprod(np.maximum(1.0 - total / at_risk, 0.0))
    before = np.append(1.0, survival[:-1])
    incidence = np.cumsum(before * failures / at_risk, axis=1)
    error = np.sqrt(_variance(incidence, before, failures, total, at_risk))
    lower, upper = _band(incidence, error, z)
    return CumulativeIncidence(
        modes=labels,
        times=times,
        survival=survival,
        at_risk=at_risk,
        incidence=incidence,
        lower=lower,
        upper=upper,
        standard_error=error,
        failures=failures,
        confidence_level=confidence_level,
        band="log-log",
        given_survival_to=start,
        last_age=float(lifetimes.durations.max()),
    )


def _mode_codes(lifetimes: Lifetimes, modes: ArrayLike) -> tuple[tuple[Any, ...], IntArray]:
    """The labels of modes that occur, in order, and each row's place among them (0 where it did not fail)."""
    labels: Any = modes
    if isinstance(labels, np.ndarray) and labels.dtype.kind in "US" and labels.shape == (len(lifetimes),):
        distinct, places = np.unique(labels[lifetimes.observed], return_inverse=True)
        found = np.zeros(len(lifetimes), dtype=np.int64)
        found[lifetimes.observed] = places
        return tuple(distinct.tolist()), found
    given: list[Any] = list(labels) if not isinstance(labels, np.ndarray) else labels.tolist()
    if len(given) != len(lifetimes):
        raise InvalidArgument(f"{len(given)} modes are given for {len(lifetimes)} rows; give one for each.")
    failed = [mode for mode, observed in zip(given, lifetimes.observed, strict=True) if observed]
    try:
        labels = tuple(sorted(set(failed)))
    except TypeError:
        labels = tuple(dict.fromkeys(failed))
    place = {label: index for index, label in enumerate(labels)}
    codes = [place[mode] if observed else 0 for mode, observed in zip(given, lifetimes.observed, strict=True)]
    return labels, np.array(codes, dtype=np.int64)


def _variance(
    incidence: FloatArray, before: FloatArray, failures: FloatArray, total: FloatArray, at_risk: FloatArray
) -> FloatArray:
    """Sum over t_j <= t of (F(t) - F_j)^2 g_j + S_j-^2 d (n - d) / n^3 - 2 (F(t) - F_j) S_j- d / n^2.

    g are Greenwood's terms over all modes. Multiplied out into running sums, one pass for all ages.
    """
    g = greenwood_terms(total, at_risk)
    own = np.cumsum(before**2 * failures * (at_risk - failures) / at_risk**3, axis=1)
    share = before * failures / at_risk**2
    sum_g, sum_fg, sum_ffg = np.cumsum(g), np.cumsum(incidence * g, axis=1), np.cumsum(incidence**2 * g, axis=1)
    sum_share, sum_fshare = np.cumsum(share, axis=1), np.cumsum(incidence * share, axis=1)
    spread = incidence**2 * sum_g - 2.0 * incidence * sum_fg + sum_ffg
    return np.maximum(spread + own - 2.0 * (incidence * sum_share - sum_fshare), 0.0)


def _band(incidence: FloatArray, error: FloatArray, z: float) -> tuple[FloatArray, FloatArray]:
    lower, upper = incidence.copy(), incidence.copy()
    inside = (incidence > 0.0) & (incidence < 1.0)
    share = incidence[inside]
    stretch = np.exp(np.minimum(z * error[inside] / (share * -np.log(share)), 700.0))
    lower[inside], upper[inside] = share**stretch, share ** (1.0 / stretch)
    return lower, upper
