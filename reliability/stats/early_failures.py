"""Do the records show failures soon after fitting that no Weibull of the later lives explains?"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray
from scipy.special import betaln

from reliability.stats.lifetimes import Lifetimes
from reliability.stats.posterior import log_evidence, split_early

FloatArray = NDArray[np.float64]

MANY_ROWS = 2000
_MOSTLY_EARLY = 0.2
_CONVINCED = 4.0  # log Bayes factor: about 55 to 1


def early_window(lifetimes: Lifetimes, candidates: Sequence[float] | None = None) -> float:
    """The age within which early failures are better counted apart, 0 where one Weibull serves.

    For each candidate age the evidence of "a share (Jeffreys' prior) fails evenly before it, the others live Weibull
    given survival to it" is weighed against one Weibull for all; the best is taken if its log Bayes factor is above 4.
    candidates: ages in the unit of the lives (from 1 % to a fifth of the median failure age, and, where that is
    young, of half the greatest age seen, if None).
    Source: Kass & Raftery 1995, J. Am. Statist. Assoc. 90, 773 (the scale of Bayes factors).
    """
    if lifetimes.failures < 5:
        return 0.0
    lifetimes = _pooled(lifetimes)
    failed = lifetimes.observed
    middle = float(np.median(np.repeat(lifetimes.durations[failed], np.ceil(lifetimes.weights[failed]).astype(int))))
    # in a young fleet most failures may be early ones: then half the greatest age seen is the measure
    reach = 0.5 * float(lifetimes.durations.max())
    measures = (middle, reach) if middle < _MOSTLY_EARLY * reach else (middle,)
    usual = np.ceil(np.concatenate([measure * np.geomspace(0.01, 0.2, 6) for measure in measures]))
    ages = usual if candidates is None else np.asarray(candidates, dtype=float)
    plain = log_evidence(lifetimes)
    found = [
        (_split_evidence(lifetimes, float(age)) - _plain(lifetimes, float(age), plain), float(age))
        for age in np.unique(ages)
    ]
    best, age = max(found, default=(0.0, 0.0))
    return age if best > _CONVINCED + np.log(max(len(found), 1)) else 0.0


def _pooled(lifetimes: Lifetimes) -> Lifetimes:
    """Rows that are alike but for site and group as one: the evidence knows neither, and is asked a dozen times."""
    if len(lifetimes) < MANY_ROWS:
        return lifetimes
    return Lifetimes(
        lifetimes.durations,
        lifetimes.observed,
        entries=lifetimes.entries,
        last_good=lifetimes.last_good,
        weights=lifetimes.weights,
    ).grouped()


def _plain(lifetimes: Lifetimes, until: float, of_all: float) -> float:
    """Evidence of one Weibull for what the split speaks of: it leaves out what late entries did before `until`, and
    whoever explains less is not to gain by it.
    """
    late = (lifetimes.entries > 0) & (lifetimes.entries < until)
    if not late.any():
        return of_all
    seen = ~late | (lifetimes.durations > until)
    rest = lifetimes.subset(seen)
    entries = np.where(late[seen], until, rest.entries)
    last_good = np.where(late[seen] & (rest.last_good < until), until, rest.last_good)
    return log_evidence(
        Lifetimes(rest.durations, rest.observed, entries=entries, last_good=last_good, weights=rest.weights)
    )


def _split_evidence(lifetimes: Lifetimes, until: float) -> float:
    early = (lifetimes.durations <= until) & lifetimes.observed & (lifetimes.entries == 0)
    if lifetimes.weights[early].sum() < 3 or not (lifetimes.durations > until).any():
        return -np.inf
    late, (failed, survived) = split_early(lifetimes, until)
    share = betaln(failed + 0.5, survived + 0.5) - betaln(0.5, 0.5)
    # spread evenly over the window: exact ages have the density 1 / until, interval rows their length over it
    exact = early & ~lifetimes.is_interval
    length = lifetimes.durations - np.nan_to_num(lifetimes.last_good)
    interval = early & lifetimes.is_interval
    placed = -(lifetimes.weights[exact].sum() * np.log(until))
    placed += float(lifetimes.weights[interval] @ np.log(np.maximum(length[interval], 1e-9) / until))
    return float(log_evidence(late) + share + placed)
