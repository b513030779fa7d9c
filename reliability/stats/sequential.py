"""May we call a redesign better yet? Repeated looks held to one error rate, and the four phrases of the verdict."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike
from scipy import special

from reliability.stats.difference_sums import age_weights, label_codes, risk_sets, weighted_sums
from reliability.stats.errors import InvalidArgument, UnsupportedRows
from reliability.stats.lifetimes import BoolArray, FloatArray, IntArray, Lifetimes

# a Brownian path on (0, 1] rises above it with chance 2 (1 - Phi(2.2414)) = 0.025
BOUNDARY = 2.2414
LIKELY = 0.9
CLEAR, LIKELY_PHRASE, SHORTER, NOT_YET = "clear", "likely", "shorter", "not yet shown"
MEANINGS = {
    CLEAR: "The new part lives longer. Were there no difference, this would be said in at most 1 of 40 rollouts, "
    "however often one looks.",
    LIKELY_PHRASE: "The new part probably lives longer (chance above 90 %), but chance alone could still explain it.",
    SHORTER: "The new part lives shorter. Were there no difference, this would be said in at most 1 of 40 rollouts, "
    "however often one looks.",
    NOT_YET: "The records do not yet tell the new part from the old.",
}


@dataclass(frozen=True)
class Look:
    """The log-rank evidence at one look.

    score: failures of old parts beyond those expected without a difference; above 0 speaks for the new part.
    information: its variance. Both stratified by site, over the same dates; the position_ fields by position, with the
    past of each position, None where not asked for. label: what the caller knows the look by (a date).
    """

    score: float
    information: float
    position_score: float | None = None
    position_information: float | None = None
    label: Any = None

    @property
    def z(self) -> float:
        """score / sqrt(information); 0 while there is no information."""
        return self.score / math.sqrt(self.information) if self.information > 0.0 else 0.0

    @property
    def position_z(self) -> float | None:
        """None where not asked for, or where no position has held both an old and a new part at one age."""
        if self.position_score is None or not self.position_information:
            return None
        return self.position_score / math.sqrt(self.position_information)


def take_look(
    lifetimes: Lifetimes,
    is_new: ArrayLike,
    *,
    sites: Any,
    positions: Any = None,
    concurrent_from: ArrayLike = 0,
    label: Any = None,
) -> Look:
    """Scores and information of old against new parts now; zeros while nothing can be compared, never an error for it.

    is_new: True for lives of the new part, shape (n,); sites, positions: labels, shape (n,), positions within their
    site. concurrent_from: age of each old part on the day its site began (0 where fitted later), from which it counts
    in the comparison by site, so that old and new are at risk over the same dates; a life over by then is left out of
    it. The comparison by position uses whole lives. Both are needed: where positions differ, those that fail often
    hold more of the old lives, and old parts then look worse by site than equally good new ones.
    Raises UnsupportedRows for rows with last_good.
    """
    count = len(lifetimes)
    if lifetimes.has_intervals:
        raise UnsupportedRows(
            "Some rows failed somewhere between two ages. Use counted_when_found where old and new are visited alike."
        )
    new = np.asarray(is_new, dtype=bool)
    begin = np.broadcast_to(np.asarray(concurrent_from, dtype=float), (count,))
    if new.shape != (count,):
        raise InvalidArgument(f"is_new has shape {new.shape}; it must have one value for each of {count} lives.")
    site_codes = label_codes(sites, count)
    score, information = _score(*_concurrent(lifetimes, new, site_codes, begin))
    if positions is None:
        return Look(score, information, label=label)
    within = site_codes * count + label_codes(positions, count)
    return Look(score, information, *_score(lifetimes, new, within), label=label)


def _concurrent(
    lifetimes: Lifetimes, new: BoolArray, strata: IntArray, begin: FloatArray
) -> tuple[Lifetimes | None, BoolArray, IntArray]:
    if not (begin > 0.0).any():
        return lifetimes, new, strata
    entries = np.maximum(lifetimes.entries, begin)
    kept = entries < lifetimes.durations
    if not kept.any():
        return None, new[kept], strata[kept]
    durations, observed, weights = (
        column[kept] for column in (lifetimes.durations, lifetimes.observed, lifetimes.weights)
    )
    return Lifetimes(durations, observed, entries=entries[kept], weights=weights), new[kept], strata[kept]


def _score(lifetimes: Lifetimes | None, new: BoolArray, strata: IntArray) -> tuple[float, float]:
    if lifetimes is None:
        return 0.0, 0.0
    # strata with one kind of part, or without a failure, add nothing: most positions, while a rollout is young
    if strata.max() > 4 * strata.size:
        strata = np.unique(strata, return_inverse=True)[1]
    held = [np.bincount(strata, weights=which) > 0.0 for which in (new, ~new, lifetimes.observed)]
    kept = np.logical_and.reduce(held)[strata]
    if not kept.any():
        return 0.0, 0.0
    if not kept.all():
        lifetimes, new, strata = lifetimes.subset(kept), new[kept], strata[kept]
    sets = risk_sets(lifetimes, new.astype(np.int64), 2, strata)
    observed, expected, covariance = weighted_sums(sets, age_weights(sets, "fleming-harrington", 0.0, 0.0))
    return float(observed[0] - expected[0]), max(float(covariance[0, 0]), 0.0)


def planned_information(hope: float, shape: float = 2.0, *, power: float = 0.9) -> float:
    """Log-rank variance at which a rollout as good as hoped for has been called clear with the given chance.

    A life `hope` times as long under a Weibull shape is a hazard hope^-shape times as high; with drift
    theta = shape log hope the path of score / sqrt(V) crosses the boundary by V with chance
    Phi(theta sqrt V - b) + exp(2 b theta sqrt V) Phi(-b - theta sqrt V). Fix it before the first look.
    Lan & DeMets, Biometrika 70 (1983) 659-663; first passage: Siegmund, Sequential Analysis (1985), equation 3.15.
    """
    if not (math.isfinite(hope) and hope > 0.0 and hope != 1.0):
        raise InvalidArgument(f"The hope is a life {hope:g} times as long; it must be a number above 0, other than 1.")
    if not (math.isfinite(shape) and shape > 0.0):
        raise InvalidArgument(f"The shape is {shape:g}; it must be a number above 0.")
    if not 0.1 <= power < 1.0:
        raise InvalidArgument(f"The chance to see it is {power:g}; it must lie between 0.1 and 1.")
    low, high = 0.0, 12.0
    for _ in range(80):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if crossing_chance(middle) < power else (low, middle)
    return float((high / (shape * math.log(hope))) ** 2)


def crossing_chance(drift: float) -> float:
    """Chance that a Brownian path with the drift at information 1 has crossed the boundary by then."""
    return float(special.ndtr(drift - BOUNDARY) + math.exp(2.0 * BOUNDARY * drift) * special.ndtr(-BOUNDARY - drift))


def sequential_boundary(information: ArrayLike, planned: float = 1.0) -> FloatArray:
    """Z that must be reached at each information: 2.2414 / sqrt(t), t = information / planned, level from t = 1.

    O'Brien & Fleming, Biometrics 35 (1979) 549-556, in the continuous form of Lan & DeMets (1983): one-sided 2.5 % over
    any number of looks. inf where there is no information.
    """
    if not (math.isfinite(planned) and planned > 0.0):
        raise InvalidArgument(f"The planned information is {planned:g}; it must be above 0.")
    share = np.asarray(information, dtype=float) / planned
    if not (share >= 0.0).all():
        raise InvalidArgument("Information must be at least 0.")
    with np.errstate(divide="ignore"):
        return BOUNDARY / np.sqrt(np.minimum(share, 1.0))


@dataclass(frozen=True)
class Verdict:
    """phrase: "clear", "likely", "shorter" or "not yet shown", with its fixed meaning.

    z, boundary, share (information now over planned, the t of the boundary), position_z: at the deciding look, which is
    the first that crosses, the look at which the planned information was reached, or else the last. decided_at: its
    label where nothing after it can change the verdict, else None. probability: of longer life, as given.
    """

    phrase: str
    meaning: str
    z: float
    boundary: float
    share: float
    position_z: float | None
    probability: float | None
    decided_at: Any
    final: bool


def verdict(looks: Look | Sequence[Look], planned: float, *, probability: float | None = None) -> Verdict:
    """The phrase that the looks, in order, allow.

    "clear": Z stratified by site has reached the boundary, and Z stratified by position agrees: it has reached the same
    boundary. Each alone may be misled, by positions that differ or by a season. Where no position has held both parts
    (position_z None) the sites decide alone. "shorter": the mirror. A crossing stands; after the planned information is
    reached no later look is used. Else "likely" where the posterior probability of longer life is above 0.9, else
    "not yet shown".
    """
    path = [looks] if isinstance(looks, Look) else list(looks)
    if not path:
        raise InvalidArgument("No look is given. Give at least one.")
    if probability is not None and not 0.0 <= probability <= 1.0:
        raise InvalidArgument(f"The probability is {probability:g}; it must lie between 0 and 1.")
    for look in path:
        boundary = float(sequential_boundary(look.information, planned))
        phrase = _crossed(look, boundary)
        ended = look.information >= planned
        if phrase or ended:
            break
    if not phrase:
        phrase = LIKELY_PHRASE if probability is not None and probability > LIKELY else NOT_YET
    return Verdict(
        phrase=phrase,
        meaning=MEANINGS[phrase],
        z=look.z,
        boundary=boundary,
        share=look.information / planned,
        position_z=look.position_z,
        probability=probability,
        decided_at=look.label if ended or phrase in (CLEAR, SHORTER) else None,
        final=bool(ended or phrase in (CLEAR, SHORTER)),
    )


def _crossed(look: Look, boundary: float) -> str:
    scores = [look.z] if look.position_z is None else [look.z, look.position_z]
    if min(scores) >= boundary:
        return CLEAR
    return SHORTER if max(scores) <= -boundary else ""
