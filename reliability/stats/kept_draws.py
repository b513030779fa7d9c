"""Draws of a posterior kept for later: fitting takes a second, counting with the same draws again does not."""

from __future__ import annotations

import base64
from dataclasses import dataclass, replace
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from reliability.stats.errors import InvalidArgument
from reliability.stats.posterior_draws import PosteriorDraws

FloatArray = NDArray[np.float64]

_COLUMNS = ("shapes", "scales", "spreads", "early_shares", "deviations")


class _Posterior(Protocol):
    @property
    def has_spread(self) -> bool: ...

    @property
    def failures(self) -> float: ...

    def draws(self, count: int, rng: np.random.Generator | None) -> PosteriorDraws: ...


@dataclass(frozen=True, eq=False)
class KeptDraws:
    """A systematic sample of a posterior in its own order, a posterior itself: `draws` takes every n-th of it.

    failures: seen by the posterior it was drawn from.
    """

    drawn: PosteriorDraws
    has_spread: bool
    failures: float

    @classmethod
    def of(cls, posterior: _Posterior, count: int, rng: np.random.Generator) -> KeptDraws:
        """So many draws of it."""
        return cls(posterior.draws(count, rng), posterior.has_spread, float(posterior.failures))

    def draws(self, count: int = 400, rng: np.random.Generator | None = None) -> PosteriorDraws:
        """Evenly spread over the kept ones, in an order of chance, so that two designs' draws are not in step."""
        if count < 1:
            raise InvalidArgument(f"count is {count}; it must be at least 1.")
        rng = np.random.default_rng() if rng is None else rng
        place = np.floor((np.arange(count) + rng.random()) * len(self.drawn) / count).astype(np.int64)
        chosen = rng.permutation(np.minimum(place, len(self.drawn) - 1))
        columns: dict[str, Any] = {
            name: None if getattr(self.drawn, name) is None else getattr(self.drawn, name)[chosen] for name in _COLUMNS
        }
        multipliers = {label: values[chosen] for label, values in self.drawn.multipliers.items()}
        return replace(self.drawn, **columns, multipliers=multipliers, _new_site_generator=rng.spawn(1)[0])

    def told(self) -> dict[str, Any]:
        """As JSON can hold it; labels of sites must be texts (or None, for one site alone)."""
        labels = list(self.drawn.multipliers)
        return {
            "has_spread": self.has_spread,
            "failures": self.failures,
            "early_until": self.drawn.early_until,
            "labels": labels,
            **{name: _text(getattr(self.drawn, name)) for name in _COLUMNS},
            "multipliers": [_text(self.drawn.multipliers[label]) for label in labels],
        }

    @classmethod
    def from_told(cls, told: dict[str, Any]) -> KeptDraws:
        """The same again from what `told` gave."""
        columns = {name: _array(told[name]) for name in _COLUMNS}
        multipliers = dict(zip(told["labels"], map(_array, told["multipliers"]), strict=True))
        drawn = PosteriorDraws(**columns, multipliers=multipliers, early_until=told["early_until"])
        return cls(drawn, told["has_spread"], told["failures"])


def _text(values: FloatArray | None) -> str | None:
    return None if values is None else base64.b64encode(values.astype("<f8").tobytes()).decode("ascii")


def _array(text: str | None) -> Any:
    return None if text is None else np.frombuffer(base64.b64decode(text), dtype="<f8").astype(np.float64)
