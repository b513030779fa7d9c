"""Scores of a forecast distribution of counts against what happened."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

FloatArray = NDArray[np.float64]


def crps(pmf: ArrayLike, outcome: ArrayLike) -> FloatArray:
    """Continuous ranked probability score: sum over k of (F(k) - [outcome <= k])^2, smaller is better.

    pmf: probabilities of 0, 1, 2 ..., shape (n,) or (m, n) for m forecasts, in counts; outcome: counts >= 0, any
    shape (for one forecast) or (m,). Outcomes beyond the last entry add their full distance. Returns the outcomes'
    shape.
    Source: Matheson & Winkler 1976; for counts Czado, Gneiting & Held 2009, Biometrics 65, 1254.
    """
    probabilities, outcomes = _checked(pmf, outcome)
    cumulative = np.cumsum(probabilities, axis=-1)
    below = np.cumsum(cumulative**2, axis=-1)
    above = np.cumsum((1.0 - cumulative[..., ::-1]) ** 2, axis=-1)[..., ::-1]
    size = probabilities.shape[-1]
    inside = np.minimum(outcomes, size)
    under = np.where(inside > 0, _pick(below, np.maximum(inside - 1, 0)), 0.0)
    over = np.where(inside < size, _pick(above, np.minimum(inside, size - 1)), 0.0)
    return under + over + np.maximum(outcomes - size, 0)


def randomised_pit(pmf: ArrayLike, outcome: ArrayLike, rng: np.random.Generator) -> FloatArray:
    """F(outcome - 1) + u p(outcome), u uniform: uniform on (0, 1) where the forecast is right.

    Shapes as in crps. Source: Czado, Gneiting & Held 2009; Smith 1985, J. Forecasting 4, 283.
    """
    probabilities, outcomes = _checked(pmf, outcome)
    size = probabilities.shape[-1]
    cumulative = np.cumsum(probabilities, axis=-1)
    low = np.where(outcomes > 0, _pick(cumulative, np.clip(outcomes - 1, 0, size - 1)), 0.0)
    at = np.where(outcomes < size, _pick(probabilities, np.minimum(outcomes, size - 1)), 0.0)
    return np.minimum(low + rng.random(outcomes.shape) * at, 1.0)


def _checked(pmf: ArrayLike, outcome: ArrayLike) -> tuple[FloatArray, NDArray[np.int64]]:
    probabilities = np.asarray(pmf, dtype=np.float64)
    raw = np.asarray(outcome)
    if probabilities.ndim not in (1, 2) or probabilities.shape[-1] == 0 or not np.isfinite(probabilities).all():
        raise ValueError(f"pmf has shape {probabilities.shape}; it must hold probabilities of 0, 1, 2 and so on.")
    if (probabilities < -1e-9).any() or (np.abs(probabilities.sum(axis=-1) - 1.0) > 1e-6).any():
        raise ValueError("pmf must hold probabilities of at least 0 that add up to 1.")
    if raw.size and ((raw < 0).any() or (raw != np.floor(raw)).any()):
        raise ValueError("outcome must be whole counts of at least 0.")
    outcomes = raw.astype(np.int64)
    if probabilities.ndim == 2 and outcomes.shape != probabilities.shape[:1]:
        raise ValueError(f"outcome has shape {outcomes.shape}; there are {probabilities.shape[0]} forecasts.")
    return probabilities, outcomes


def _pick(table: FloatArray, index: NDArray[np.int64]) -> FloatArray:
    return table[index] if table.ndim == 1 else np.take_along_axis(table, index[:, None], axis=1)[:, 0]
