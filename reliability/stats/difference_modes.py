"""The same comparison for each failure mode: which of them the new part has really changed."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from reliability.stats.competing import CumulativeIncidence, cumulative_incidence
from reliability.stats.difference_logrank import LogRank, logrank
from reliability.stats.errors import InvalidArgument, StatisticsError
from reliability.stats.kaplan_meier import number_at_risk
from reliability.stats.lifetimes import FloatArray, Lifetimes


@dataclass(frozen=True, eq=False)
class ModeComparison:
    """One failure mode in each group, arrays in the order of `groups`, shape (K,).

    test: log-rank test of this mode alone, the others counted as withdrawn ("if only this mode acted"); None with the
    reason in `untested`. failures: seen so far, weighted. incidence, lower, upper: share that fails by this mode before
    the horizon with the others acting too (cumulative incidence). Where none failed by it, upper is the limit of a
    share of which none is seen among those watched so long; where a group was not watched so long 0 to 1, known False.
    """

    mode: Any
    groups: NDArray[Any]
    failures: FloatArray
    test: LogRank | None
    untested: str
    horizon: float
    incidence: FloatArray
    lower: FloatArray
    upper: FloatArray
    known: NDArray[np.bool_]


def compare_modes(
    lifetimes: Lifetimes,
    modes: ArrayLike,
    horizon: float,
    *,
    strata: Any = None,
    confidence_level: float = 0.95,
) -> list[ModeComparison]:
    """Each mode that occurs, the most frequent first: test between `lifetimes.groups` and share failed by the horizon.

    modes: label of each life's failure, shape (n,); ignored where the life did not fail. A group observed for a shorter
    time than the horizon has known False. Prentice et al., Biometrics 34 (1978) 541-554.
    Raises InvalidArgument without groups or for a horizon not above 0, UnsupportedRows for rows with last_good.
    """
    if lifetimes.groups is None:
        raise InvalidArgument("A comparison needs the group of each life. Give groups.")
    if not (np.isfinite(horizon) and horizon > 0.0):
        raise InvalidArgument(f"The horizon is {horizon:g}; it must be above 0.")
    if isinstance(modes, np.ndarray) and modes.dtype.kind in "US":
        labels: NDArray[Any] = modes
    else:
        labels = np.empty(len(lifetimes), dtype=object)
        labels[:] = list(np.asarray(modes, dtype=object))
    shares = [_incidence(lifetimes, labels, group, confidence_level) for group in lifetimes.group_labels.tolist()]
    failed = lifetimes.weights * lifetimes.observed
    counts: dict[Any, float] = {}
    for label, weight in zip(labels[lifetimes.observed].tolist(), failed[lifetimes.observed].tolist(), strict=True):
        counts[label] = counts.get(label, 0.0) + weight
    return [
        _compared(lifetimes, labels, mode, shares, horizon, strata, confidence_level)
        for mode in sorted(counts, key=lambda mode: (-counts[mode], str(mode)))
    ]


def _incidence(
    lifetimes: Lifetimes, labels: NDArray[Any], group: Any, confidence_level: float
) -> tuple[Lifetimes, CumulativeIncidence | None]:
    """The group's lives and their cumulative incidence; None where nothing has failed in it."""
    own = np.asarray(lifetimes.groups == group)
    part = lifetimes.subset(own)
    return part, cumulative_incidence(part, labels[own], confidence_level) if part.observed.any() else None


def _compared(
    lifetimes: Lifetimes, labels: NDArray[Any], mode: Any, shares: list[Any], horizon: float, strata: Any, level: float
) -> ModeComparison:
    of_mode = np.asarray(labels == mode, dtype=bool) & lifetimes.observed
    test, untested = None, ""
    try:
        test = logrank(lifetimes.withdrawn_where(~of_mode), strata=strata)
    except StatisticsError as error:
        untested = str(error)
    rows = [_share(part, curve, mode, horizon, level) for part, curve in shares]
    incidence, lower, upper, known = (np.array(column) for column in zip(*rows, strict=True))
    failures = np.bincount(
        lifetimes.group_codes, weights=lifetimes.weights * of_mode, minlength=lifetimes.group_labels.size
    )
    return ModeComparison(
        mode, lifetimes.group_labels, failures, test, untested, float(horizon), incidence, lower, upper, known
    )


def _share(
    part: Lifetimes, curve: CumulativeIncidence | None, mode: Any, horizon: float, confidence_level: float
) -> tuple[float, float, float, bool]:
    """Share failed by the horizon with its limits, and whether the group was watched so long."""
    ended = curve is not None and curve.survival[-1] == 0.0
    if horizon > float(part.durations.max()) and not ended:
        return 0.0, 0.0, 1.0, False
    if curve is not None and mode in curve.modes and curve.incidence_at(mode, horizon) > 0.0:
        lower, upper = curve.band_at(mode, horizon)
        return float(curve.incidence_at(mode, horizon)), float(lower), float(upper), True
    # none of those watched to the horizon failed by it: the upper limit of a share of which none is seen
    watched = float(number_at_risk(part, horizon))
    most = 1.0 - (0.5 - 0.5 * confidence_level) ** (1.0 / watched) if watched > 0.0 else 1.0
    return 0.0, 0.0, float(most), True
