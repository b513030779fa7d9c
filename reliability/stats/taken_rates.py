"""How often failures take other parts along, mode by mode, each leaning on what is true of all of them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import betaln

from reliability.stats.errors import InvalidArgument

FloatArray = NDArray[np.float64]

_CHANCES = (np.arange(60) + 0.5) / 60.0
_STRENGTHS = 2.0 ** np.arange(-2, 9)  # how many failures' worth of knowledge one mode is about another
MIX_STRENGTH = 4.0  # failures of a design that outweigh the mix of modes of all designs


@dataclass(frozen=True, eq=False)
class Chances:
    """Of each mode: mean chance (modes,) and mean product with every other's (modes, modes)."""

    mean: FloatArray
    product: FloatArray

    def of_mix(self, weights: ArrayLike, known: float) -> tuple[float, float]:
        """Numbers (taken, left) that stand for the chance of a failure whose mode is not known beforehand.

        weights: of the modes (modes,); known: how many failures the mix was seen in, which makes the mix
        Dirichlet(known * weights). The chance is the sum of weight times chance over modes; the two numbers are those
        of a beta distribution with its mean and variance.
        """
        share = np.asarray(weights, dtype=np.float64)
        share = share / share.sum()
        together = (known * np.outer(share, share) + np.diag(share)) / (known + 1.0)
        mean = float(share @ self.mean)
        variance = max(float((together * self.product).sum()) - mean**2, 1e-12)
        size = max(mean * (1.0 - mean) / variance - 1.0, 1e-3)
        return mean * size, (1.0 - mean) * size


def chances_by_mode(taken: ArrayLike, left: ArrayLike) -> Chances:
    """Chances by mode, p_m ~ beta(s c, s (1 - c)), from failures that took parts along and those that did not (modes,).

    c, common to the modes, and s, how alike they are, are integrated on a grid: c with Jeffreys' prior, log s evenly.
    Few failures of a mode thus lean on the others' as far as these agree among themselves. Formula: beta-binomial
    likelihood, prod_m B(s c + y_m, s (1 - c) + n_m - y_m) / B(s c, s (1 - c)). Raises InvalidArgument. Source:
    Gelman, Carlin, Stern, Dunson, Vehtari & Rubin 2013, Bayesian Data Analysis, 3rd ed., ch. 5.3 (rat tumours).
    """
    some, none = np.asarray(taken, dtype=np.float64), np.asarray(left, dtype=np.float64)
    if some.ndim != 1 or some.shape != none.shape or not some.size:
        raise InvalidArgument("taken and left must be lists of the same modes, one at least.")
    if (some < 0).any() or (none < 0).any():
        raise InvalidArgument("Counts of past failures cannot be negative.")
    chance, strength = (each.ravel() for each in np.meshgrid(_CHANCES, _STRENGTHS, indexing="ij"))
    first, second = strength * chance, strength * (1.0 - chance)
    logs = betaln(first[:, None] + some, second[:, None] + none) - betaln(first, second)[:, None]
    weight = logs.sum(axis=1) - 0.5 * np.log(chance * (1.0 - chance))
    weight = np.exp(weight - weight.max())
    weight /= weight.sum()
    total = strength[:, None] + some + none
    mean = (first[:, None] + some) / total
    product = np.einsum("g,gm,gn->mn", weight, mean, mean)
    square = mean * (first[:, None] + some + 1.0) / (total + 1.0)
    np.fill_diagonal(product, weight @ square)
    return Chances(weight @ mean, product)


def mixed_modes(counts: ArrayLike, coming: ArrayLike) -> tuple[FloatArray, float]:
    """Shares of the modes among failures to come (modes,), and how many past failures that rests on.

    counts: past failures by design and mode (designs, modes); coming: failures expected of each design. A design with
    few failures leans on the mix of all designs with the weight of MIX_STRENGTH failures.
    """
    seen, expected = np.asarray(counts, dtype=np.float64), np.asarray(coming, dtype=np.float64)
    everything = seen.sum(axis=0) + 0.5 / seen.shape[1]
    everything = everything / everything.sum()
    own = (seen + MIX_STRENGTH * everything) / (seen.sum(axis=1, keepdims=True) + MIX_STRENGTH)
    share = expected / expected.sum() if expected.sum() > 0 else np.full(expected.size, 1.0 / expected.size)
    known = 1.0 / float((share**2 / (seen.sum(axis=1) + MIX_STRENGTH)).sum())
    return share @ own, min(known, float(seen.sum()) + MIX_STRENGTH)
