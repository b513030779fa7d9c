"""Running parts whose age is known only to lie between two bounds: each draw of the lives says how old they may be."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
Cumulative = Callable[[FloatArray], FloatArray]

NODES, INNER = 12, 8
POWER = 3  # nodes lie closer together where parts are young
_SPENT = 10.0  # cumulative hazard beyond which hardly any part lives on
_LEAST, _MOST = 1e-6, 1e15
_HALVINGS = 14


def age_nodes(cumulative: Cumulative, least: FloatArray, most: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Ages and their probabilities, both (draws, parts, NODES + 1), of parts between `least` and `most` old.

    cumulative: -log S of each part's life at ages (draws, parts, n). least, most: (draws or 1, parts), in the unit of
    the lives; most may be infinite.

    A part in a place in which new parts have followed each other since `most` ago is of age x with density
    m(most - x) S(x), m the renewal density, or still the first one, of age `most`, with probability S(most) (Cox 1962,
    Renewal Theory, ch. 5); that is cut at `least`. m(u) = f(u) + F(u)^2 / int_0^u S, exact for small and great u
    (Bartholomew 1963, Journal of the Royal Statistical Society B 25, 432-441). Without an upper bound m is constant.
    The last node is the first part's; the others are Gauss-Legendre nodes in the cube root of the age beyond `least`.
    """
    known = cumulative(least[..., None] + np.zeros((1, 1, 1)))
    least = np.broadcast_to(least, known.shape[:2])
    most = np.broadcast_to(most, known.shape[:2])
    reach = np.minimum(_reach(cumulative, least, known[..., 0]), most - least)
    place, width = _legendre(NODES)
    ages = least[..., None] + reach[..., None] * place**POWER
    alive = np.exp(np.minimum(known - cumulative(ages), 0.0))
    weight = alive * reach[..., None] * (POWER * place ** (POWER - 1) * width)
    first = np.zeros(known.shape)
    bounded = np.isfinite(most)
    if bounded.any():
        ceiling = np.where(bounded, most, least)[..., None]
        weight = np.where(bounded[..., None], weight * _renewals(cumulative, np.maximum(ceiling - ages, 0.0)), weight)
        first = np.where(bounded[..., None], np.exp(np.minimum(known - cumulative(ceiling), 0.0)), 0.0)
        ages = np.concatenate([ages, ceiling], axis=2)
    else:
        ages = np.concatenate([ages, ages[..., -1:]], axis=2)
    weight = np.concatenate([weight, first], axis=2)
    total = weight.sum(axis=2, keepdims=True)
    # a part older than any life is as old as is known
    lost = ~(total > 0) | ~np.isfinite(total)
    weight = np.where(lost, np.eye(NODES + 1)[0], weight)
    return np.where(lost, least[..., None], ages), weight / np.where(lost, 1.0, total)


def hazard_since(cumulative: Cumulative, least: FloatArray, most: FloatArray, gone: FloatArray) -> FloatArray:
    """-log of the chance to live on for `gone` (draws or 1, parts, n; 0 first) from now, averaged over the ages."""
    ages, weights = age_nodes(cumulative, least, most)
    alive: FloatArray = np.zeros(1)
    for node in range(ages.shape[2]):
        age = ages[..., node : node + 1]
        with np.errstate(invalid="ignore"):
            since = cumulative(age + gone) - cumulative(age)
        since = np.where(np.isfinite(since), since, np.where(gone > 0, np.inf, 0.0))
        alive = alive + weights[..., node : node + 1] * np.exp(-since)
    result: FloatArray = -np.log(np.clip(alive, 1e-300, 1.0))
    return result


def drawn_ages(cumulative: Cumulative, least: FloatArray, most: FloatArray, luck: FloatArray) -> FloatArray:
    """One of the ages for each draw and part, (draws, parts), by evenly spread luck from 0 to 1."""
    ages, weights = age_nodes(cumulative, least, most)
    place = np.minimum((np.cumsum(weights, axis=2) < luck[..., None]).sum(axis=2), NODES)
    chosen: FloatArray = np.take_along_axis(ages, place[..., None], axis=2)[..., 0]
    return chosen


def _renewals(cumulative: Cumulative, after: FloatArray) -> FloatArray:
    """Renewal density at these times since the first part was new, (draws, parts, n)."""
    at = np.maximum(after, _LEAST)
    step = 1e-3
    failed = -np.expm1(-cumulative(at))
    density = (np.exp(-cumulative(at * (1.0 - step))) - np.exp(-cumulative(at * (1.0 + step)))) / (2.0 * step * at)
    place, width = _legendre(INNER)
    new = np.zeros(at.shape)
    end = np.minimum(at, _reach(cumulative, new, new)) if at.size else at
    living = np.zeros(at.shape)
    for node, share in zip(place, width, strict=True):
        living += POWER * node ** (POWER - 1) * share * end * np.exp(-cumulative(end * node**POWER))
    result: FloatArray = np.maximum(density, 0.0) + failed**2 / np.maximum(living, 1e-300)
    return result


def _reach(cumulative: Cumulative, age: FloatArray, known: FloatArray) -> FloatArray:
    """How much older than `age` hardly any part gets, in the shape of `age`: (draws, parts) or with n more."""
    flat = age.ndim == 2
    ages, spent = (age[..., None], known[..., None]) if flat else (age, known)
    low, high = np.full(ages.shape, np.log(_LEAST)), np.full(ages.shape, np.log(_MOST))
    for _ in range(_HALVINGS):
        middle = 0.5 * (low + high)
        with np.errstate(invalid="ignore"):
            over = ~(cumulative(ages + np.exp(middle)) - spent < _SPENT)
        low, high = np.where(over, low, middle), np.where(over, middle, high)
    found: FloatArray = np.exp(high)
    return found[..., 0] if flat else found


def _legendre(count: int) -> tuple[Any, Any]:
    place, width = np.polynomial.legendre.leggauss(count)
    return 0.5 * (place + 1.0), 0.5 * width
