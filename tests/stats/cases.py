"""Seeded random life data of every kind, shared by the estimator tests."""

from __future__ import annotations

import numpy as np
from hypothesis import strategies as st

from reliability.stats.lifetimes import Lifetimes


def weibull_lives(
    rng: np.random.Generator,
    count: int,
    *,
    shape: float = 2.0,
    scale: float = 100.0,
    censored: bool = True,
    truncated: bool = False,
    intervals: bool = False,
    weighted: bool = False,
) -> Lifetimes:
    """Lives that follow a Weibull exactly, seen in the chosen imperfect way."""
    entries = rng.uniform(0.0, 0.8 * scale, count) * (rng.random(count) < 0.6) if truncated else np.zeros(count)
    ages = scale * ((entries / scale) ** shape + rng.exponential(size=count)) ** (1.0 / shape)
    ends = entries + rng.uniform(0.2 * scale, 2.0 * scale, count) if censored else np.full(count, np.inf)
    observed = ages <= ends
    durations = np.minimum(ages, ends)
    last_good = np.full(count, np.nan)
    if intervals:
        step = 0.15 * scale
        seen = observed & (rng.random(count) < 0.7)
        left = np.maximum(np.floor(ages / step) * step, entries)
        right = (np.floor(ages / step) + 1.0) * step
        last_good = np.where(seen, left, np.nan)
        durations = np.where(seen, right, durations)
    weights = rng.integers(1, 4, count) if weighted else 1
    return Lifetimes(durations, observed, entries=entries, last_good=last_good, weights=weights)


@st.composite
def small_lives(draw: st.DrawFn, *, intervals: bool = True, largest: int = 12) -> Lifetimes:
    """Up to a dozen rows with whole ages, many ties, any mix of kinds."""
    count = draw(st.integers(1, largest))
    durations = draw(st.lists(st.integers(1, 9), min_size=count, max_size=count))
    observed = draw(st.lists(st.booleans(), min_size=count, max_size=count))
    entries = [draw(st.sampled_from([0, 0, draw(st.integers(0, duration - 1))])) for duration in durations]
    last_good = [np.nan] * count
    if intervals:
        last_good = [
            draw(st.sampled_from([np.nan, float(draw(st.integers(entry, duration)))]))
            for entry, duration in zip(entries, durations, strict=True)
        ]
    weights = draw(st.lists(st.integers(1, 5), min_size=count, max_size=count))
    return Lifetimes(durations, observed, entries=entries, last_good=last_good, weights=weights)
