"""Draws of the lives of several designs side by side: positions may hold one design now and get another later."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from reliability.stats.count_masses import Hazards
from reliability.stats.count_positions import Classes
from reliability.stats.errors import InvalidArgument
from reliability.stats.posterior_draws import PosteriorDraws

LEAST_SHAPE, SOON = 2.5, 1.3
FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]


class Posterior(Protocol):
    """What a forecast asks of a posterior: `WeibullPosterior`, `LifePosterior`, `KnownWeibull` or `KeptDraws`."""

    @property
    def has_spread(self) -> bool: ...

    def draws(self, count: int, rng: np.random.Generator | None) -> PosteriorDraws: ...


@dataclass(frozen=True, eq=False)
class Roles:
    """Which design runs at each position, is fitted there from now on, and after the switch; codes (n,) or one."""

    posteriors: list[Posterior]
    running: IntArray
    fitted: IntArray
    later: IntArray | None

    @property
    def has_spread(self) -> bool:
        """Whether sites differ for any of the designs."""
        return any(posterior.has_spread for posterior in self.posteriors)


def roles_of(
    posterior: Posterior | Mapping[Any, Posterior],
    designs: Sequence[Any] | None,
    next_designs: Sequence[Any] | None,
    later: Sequence[Any] | Posterior | None,
    switched: bool,
) -> Roles:
    """Codes for labels; one posterior alone (and the next one) stands for all positions."""
    if (later is not None) != switched:
        raise InvalidArgument("What goes in after a switch and switch_at belong together: give both or neither.")
    zero = np.zeros(1, dtype=np.int64)
    if not isinstance(posterior, Mapping):
        if designs is not None or next_designs is not None:
            raise InvalidArgument("Labels of designs need a posterior for each of them.")
        following: list[Any] = [] if later is None else [later]
        return Roles([posterior, *following], zero, zero, None if later is None else zero + 1)
    if designs is None:
        raise InvalidArgument("Several posteriors need the design of every position.")
    number = {label: index for index, label in enumerate(posterior)}

    def codes(labels: Any) -> IntArray:
        unknown = [label for label in dict.fromkeys(labels) if label not in number]
        if unknown:
            raise InvalidArgument(f"There is no posterior of design {unknown[0]}.")
        return np.array([number[label] for label in labels], dtype=np.int64)

    running = codes(designs)
    fitted = running if next_designs is None else codes(next_designs)
    return Roles(list(posterior.values()), running, fitted, None if later is None else codes(later))


@dataclass(frozen=True, eq=False)
class DesignDraws:
    """Parameters (draws, designs), early_until (designs,) and hazard levels with site factors (draws, designs,
    sites).
    """

    shapes: FloatArray
    scales: FloatArray
    early: FloatArray
    early_until: FloatArray
    deviations: FloatArray | None
    levels: FloatArray
    rates: FloatArray

    @classmethod
    def drawn(
        cls, posteriors: Sequence[Posterior], draws: int, rng: np.random.Generator, site_labels: Sequence[Any]
    ) -> DesignDraws:
        """The same number of draws of each design; sites without history draw from each design's spread."""
        found = [posterior.draws(draws, rng) for posterior in posteriors]
        lognormal = any(each.deviations is not None and each.deviations.any() for each in found)
        nothing = np.zeros(draws)
        levels = np.stack([each.levels for each in found], axis=1)
        factors = [
            each.for_sites(site_labels) if posterior.has_spread else np.ones((draws, len(site_labels)))
            for posterior, each in zip(posteriors, found, strict=True)
        ]
        deviations = [nothing if each.deviations is None else each.deviations for each in found]
        return cls(
            shapes=np.stack([each.shapes for each in found], axis=1),
            scales=np.stack([each.scales for each in found], axis=1),
            early=np.stack([each.early_shares for each in found], axis=1),
            early_until=np.array([each.early_until for each in found]),
            deviations=np.stack(deviations, axis=1) if lognormal else None,
            levels=levels,
            rates=levels[:, :, None] * np.stack(factors, axis=1),
        )

    def hazards(self, chunk: IntArray, design: IntArray, classes: Classes) -> Hazards:
        """Hazards of some draws where each class lives by its design, (draws, classes)."""
        return Hazards(
            shape=self.shapes[chunk][:, design],
            rate=self.rates[chunk][:, design, classes.site],
            early=self.early[chunk][:, design],
            early_until=self.early_until[design],
            scale=self.scales[chunk][:, design],
            deviation=None if self.deviations is None else self.deviations[chunk][:, design],
        )

    def sharpness(self, used: IntArray) -> FloatArray:
        """Shape over scale at each draw's hardest site, (draws,): one over the spread of its lives, or their number."""
        shapes, scales = self.shapes[:, used], self.scales[:, used]
        hardest = self.rates[:, used].max(axis=2, initial=0.0) / self.levels[:, used]
        with np.errstate(over="ignore"):
            # where new parts fail at once the first cells must be fine
            sharp = (
                np.where(shapes < SOON, 2.0 * LEAST_SHAPE, np.maximum(shapes, LEAST_SHAPE))
                / scales
                * np.maximum(hardest, 1e-300) ** (1.0 / shapes)
            )
        return sharp.max(axis=1)
