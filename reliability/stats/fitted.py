"""What every fitted life distribution offers: quantiles, survival, mean, intervals and comparison figures."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, field
from typing import Any, ClassVar

import numpy as np
from numpy.typing import ArrayLike

from reliability.stats.errors import InvalidArgument
from reliability.stats.lifetimes import FloatArray
from reliability.stats.newton import EvaluatePlane
from reliability.stats.profile_intervals import Curve, Interval, Scale, quantity_interval

# a quantity: "shape", "scale", "mean", "median", ("quantile", p) or ("survival", t)
Quantity = str | tuple[str, float]


@dataclass(frozen=True, eq=False, kw_only=True)
class LifeFit:
    """A maximum-likelihood fit. Ages carry the unit of the durations.

    covariance: of the two reported parameters, in the order of `parameter_names`, shape (2, 2), inverse of the
    observed information. lives and failures are sums of weights. converged is always True: a search that does not
    converge raises.
    """

    log_likelihood: float
    covariance: FloatArray
    lives: float
    failures: float
    iterations: int
    converged: bool = True
    _evaluate: EvaluatePlane = field(repr=False)
    _best: tuple[float, float] = field(repr=False)
    _best_covariance: FloatArray = field(repr=False)

    distribution: ClassVar[str] = ""
    parameter_names: ClassVar[tuple[str, ...]] = ()
    free_parameters: ClassVar[int] = 2

    @property
    def aic(self) -> float:
        """Akaike's criterion, 2 k - 2 log likelihood."""
        return 2.0 * self.free_parameters - 2.0 * self.log_likelihood

    @property
    def aicc(self) -> float:
        """AIC + 2 k (k + 1) / (n - k - 1), n = number of lives; inf where there are no more than k + 1 lives.

        Hurvich & Tsai, Biometrika 76 (1989) 297-307.
        """
        spare = self.lives - self.free_parameters - 1.0
        if spare <= 0.0:
            return float("inf")
        return self.aic + 2.0 * self.free_parameters * (self.free_parameters + 1.0) / spare

    def quantile(self, probability: ArrayLike) -> Any:
        """The age by which the share `probability` has failed (0.1 gives B10); a float, or an array as given."""
        share = np.asarray(probability, dtype=float)
        if not ((share > 0.0) & (share < 1.0)).all():
            raise InvalidArgument(f"The share failed is {share.tolist()}; it must lie between 0 and 1.")
        return plain_number(self._quantile(share))

    def survival(self, age: ArrayLike) -> Any:
        """S(age), the share still good at the age; a float, or an array as given."""
        ages = np.asarray(age, dtype=float)
        if not (ages >= 0.0).all():
            raise InvalidArgument(f"The age is {ages.tolist()}; it must be at least 0.")
        return plain_number(self._survival(ages))

    @property
    def median(self) -> float:
        return self.quantile(0.5)

    @property
    def mean(self) -> float:
        raise NotImplementedError

    def interval(
        self, quantity: Quantity, confidence_level: float = 0.95, method: str = "likelihood-ratio"
    ) -> Interval:
        """Confidence interval of "shape", "scale", "mean", "median", ("quantile", p) or ("survival", t).

        "likelihood-ratio": the values whose profile log-likelihood lies within half the chi-square quantile of the
        maximum; may be unbounded, and then says so by a flag. "wald": symmetric on the log of the quantity, on
        log(-log S) for a survival. "wald-plain": symmetric on the quantity itself.
        Meeker & Escobar, Statistical Methods for Reliability Data (1998), chapter 8.
        """
        curve, scale, limits = self._curve(quantity)
        return quantity_interval(
            self._evaluate, self._best, self._best_covariance, curve, scale, quantity, confidence_level, method, limits
        )

    def _quantile(self, share: FloatArray) -> FloatArray:
        raise NotImplementedError

    def _survival(self, ages: FloatArray) -> FloatArray:
        raise NotImplementedError

    def _curve(self, quantity: Quantity) -> tuple[Curve, Scale, tuple[float, float] | None]:
        raise NotImplementedError


@dataclass(frozen=True)
class Comparison:
    """One line of the AICc table: difference to the best, and the Akaike weight (shares that add to 1)."""

    distribution: str
    log_likelihood: float
    free_parameters: int
    aicc: float
    difference: float
    weight: float


def compare_fits(fits: Iterable[LifeFit]) -> list[Comparison]:
    """The fits of the same lives ordered by AICc (by AIC where there are too few lives for AICc), the best first.

    Burnham & Anderson, Model Selection and Multimodel Inference (2002), chapter 2.
    """
    fits = list(fits)
    scores = np.array([fit.aicc for fit in fits])
    if not np.isfinite(scores).all():
        scores = np.array([fit.aic for fit in fits])
    differences = scores - scores.min()
    weights = np.exp(-0.5 * differences)
    weights /= weights.sum()
    rows = [
        Comparison(
            fit.distribution,
            fit.log_likelihood,
            fit.free_parameters,
            float(score),
            float(difference),
            float(weight),
        )
        for fit, score, difference, weight in zip(fits, scores, differences, weights, strict=True)
    ]
    return sorted(rows, key=lambda row: row.difference)


def split_quantity(quantity: Quantity) -> tuple[str, float]:
    """The kind of a quantity and its number (p or t; 0 where there is none). Raises InvalidArgument."""
    if isinstance(quantity, str):
        return ("quantile", 0.5) if quantity == "median" else (quantity, 0.0)
    try:
        kind, number = quantity
        number = float(number)
    except (TypeError, ValueError) as error:
        raise unknown_quantity(quantity) from error
    if kind.endswith("quantile") and not 0.0 < number < 1.0:
        raise InvalidArgument(f"The share failed is {number:g}; it must lie between 0 and 1.")
    if kind.endswith("survival") and not 0.0 < number < np.inf:
        raise InvalidArgument(f"The age is {number:g}; it must be a number above 0.")
    return kind, number


def unknown_quantity(quantity: Any) -> InvalidArgument:
    return InvalidArgument(
        f'The quantity {quantity!r} is not known. Ask for "shape", "scale", "mean", "median", ("quantile", p) '
        'or ("survival", t).'
    )


def plain_number(values: FloatArray) -> Any:
    """A float where a single number was asked for, else the array."""
    return float(values) if np.ndim(values) == 0 else values
