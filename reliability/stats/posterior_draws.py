"""Draws from a posterior of lives: what a count asks of it, whatever the family."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from reliability.stats.lifetimes import Lifetimes

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class PosteriorDraws:
    """Draws of the parameters: shapes, scales, spreads (count,) and a multiplier of the hazard for each known site.

    A part of site s in draw i lives Weibull(shapes[i], scales[i]) with its hazard times multiplier[i, s]; where
    deviations[i] is above 0 it is lognormal with that deviation of the log and the median scales[i] instead.
    early_shares (count,) is the chance to fail within `early_until` of fitting, evenly spread; 0 without such a part.
    """

    shapes: FloatArray
    scales: FloatArray
    spreads: FloatArray
    multipliers: dict[Any, FloatArray]
    early_shares: FloatArray
    early_until: float = 0.0
    deviations: FloatArray | None = None
    _new_site_generator: np.random.Generator = field(default_factory=lambda: np.random.default_rng(0), repr=False)

    @property
    def levels(self) -> FloatArray:
        """The hazard's level, scale^-shape; 1 for lognormal draws, whose level is in the median (count,)."""
        weibull = np.exp(-self.shapes * np.log(self.scales))
        return weibull if self.deviations is None else np.where(self.deviations > 0, 1.0, weibull)

    def for_sites(self, labels: Iterable[Any]) -> FloatArray:
        """Multipliers (count, number of labels); a label without history draws from the spread, once for good."""
        return np.stack([self._multiplier(label) for label in labels], axis=1)

    def _multiplier(self, label: Any) -> FloatArray:
        if label not in self.multipliers:
            self.multipliers[label] = _gamma_spread(self.spreads, self._new_site_generator)
        return self.multipliers[label]

    def __len__(self) -> int:
        return int(self.shapes.size)


def _gamma_spread(spreads: FloatArray, rng: np.random.Generator) -> FloatArray:
    known = np.maximum(spreads, 1e-6)
    return np.where(spreads > 0, rng.gamma(1.0 / known, known), 1.0)


def site_columns(lifetimes: Lifetimes, factors: FloatArray) -> dict[Any, FloatArray]:
    """Factors (count, sites) by the label of the site."""
    labels = lifetimes.site_labels
    names = labels.tolist() if labels.size else [None]
    return {name: factors[:, index] for index, name in enumerate(names)}


def joined_draws(
    parts: Sequence[PosteriorDraws], early_shares: FloatArray, early_until: float, rng: np.random.Generator
) -> PosteriorDraws:
    """Draws of several posteriors of the same records as one; a site unknown to a part has the factor 1 there."""
    labels = dict.fromkeys(label for part in parts for label in part.multipliers)
    return PosteriorDraws(
        shapes=np.concatenate([part.shapes for part in parts]),
        scales=np.concatenate([part.scales for part in parts]),
        spreads=np.concatenate([part.spreads for part in parts]),
        multipliers={
            label: np.concatenate([part.multipliers.get(label, np.ones(len(part))) for part in parts])
            for label in labels
        },
        early_shares=early_shares,
        early_until=early_until,
        deviations=np.concatenate([_deviations(part) for part in parts]),
        _new_site_generator=rng.spawn(1)[0],
    )


def _deviations(part: PosteriorDraws) -> FloatArray:
    return np.zeros(len(part)) if part.deviations is None else part.deviations
