"""What ratio of lives the money of a redesign rests on: the same dates, all history, or the hope as an assumption.

The verdict is drawn from parts watched over the same dates at the same sites, so money is counted with that ratio
wherever one can be told. All history mixes in other water, seasons and habits; the hope is no evidence at all.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from reliability.forecasts.learned import FEW, SHAPE_SPREAD, Learned
from reliability.life_answer import finite
from reliability.redesigns.compared import at_the_same_time
from reliability.redesigns.evidence import both_sides
from reliability.stats.difference import counted_when_found
from reliability.stats.errors import StatisticsError
from reliability.stats.life_ratio import life_ratio
from reliability.stats.life_ratio_posterior import LOG_SHAPE_PRIOR, LifeRatioPosterior, life_ratio_posterior
from reliability.stats.posterior_draws import PosteriorDraws
from reliability.stats.weibull_fit import fit_weibull

if TYPE_CHECKING:
    from reliability.redesigns.money import Side
    from reliability.stats.lifetimes import Lifetimes

FloatArray = NDArray[np.float64]
SAME_DATES, ALL_HISTORY, HOPE = "same dates", "all history", "hope"
BASES = (SAME_DATES, ALL_HISTORY, HOPE)
LOG_2 = math.log(2.0)


@dataclass(frozen=True, eq=False)
class Stretch:
    """New life over old, draw by draw: the ratio of medians and that of shapes, each (draws,)."""

    medians: FloatArray
    shapes: FloatArray

    @classmethod
    def known(cls, ratio: float) -> Stretch:
        return cls(np.array([ratio]), np.ones(1))

    @classmethod
    def of(cls, posterior: LifeRatioPosterior) -> Stretch:
        """In the order of the ratio, so that every n-th draw is an even sample of it."""
        medians = np.exp(posterior.log_ratios())
        order = np.argsort(medians)
        return cls(medians[order], (posterior.after_shapes / posterior.before_shapes)[order])

    def spread_over(self, count: int, rng: np.random.Generator) -> Stretch:
        place = np.floor((np.arange(count) + 0.5) * self.medians.size / count).astype(np.int64)
        chosen = rng.permutation(place)
        return Stretch(self.medians[chosen], self.shapes[chosen])


@dataclass(frozen=True, eq=False)
class InStep:
    """The life of an old part, and that of the new one as so many times it, from the same draws.

    Drawn apart the two would differ by what is not known of the old part as well, which both share.
    """

    life: Any  # of the old part
    stretch: Stretch | None  # None: the old part itself

    @property
    def has_spread(self) -> bool:
        return bool(self.life.has_spread)

    @property
    def failures(self) -> float:
        return float(self.life.failures)

    def draws(self, count: int = 400, rng: np.random.Generator | None = None) -> PosteriorDraws:
        """The generator given is left alone: it differs from design to design."""
        old: PosteriorDraws = self.life.draws(count, np.random.default_rng(11))
        if self.stretch is None:
            return old
        by = self.stretch.spread_over(count, np.random.default_rng(12))
        shapes = old.shapes * by.shapes
        weibull = old.scales * LOG_2 ** (1.0 / old.shapes) * by.medians / LOG_2 ** (1.0 / shapes)
        if old.deviations is None:
            return replace(old, shapes=shapes, scales=weibull)
        # of lognormal draws the scale is the median
        scales = np.where(old.deviations > 0, old.scales * by.medians, weibull)
        return replace(old, shapes=shapes, scales=scales, deviations=old.deviations / by.shapes)


@dataclass(frozen=True, eq=False)
class Basis:
    """stretch None: each part as the forecast draws it. ratio: of medians, 80 of 100 cases; lower: what the records
    allow at least. against: the old parts of the ratio. why_not: why what was asked for cannot be told.
    """

    name: str
    stretch: Stretch | None
    ratio: dict[str, Any]
    lower: float | None
    against: tuple[str, ...]
    why_not: str = ""
    leans: bool = False  # the new part's shape leans on the old one's

    def told(self) -> dict[str, Any]:
        return {
            "name": self.name,
            "ratio": self.ratio,
            "lower": finite(self.lower),
            "against": list(self.against),
            "why_not": self.why_not,
            "leans": self.leans,
        }


def basis_of(side: Side, taught: Learned, asked: str) -> Basis:
    """The one asked for; without a choice, or where it tells nothing, the first that tells a ratio."""
    ways = {SAME_DATES: of_same_dates, ALL_HISTORY: of_all_history, HOPE: of_hope}
    why_not = ""
    for name in dict.fromkeys([asked or SAME_DATES, *BASES]):
        found = ways[name](side, taught)
        if found is not None:
            return replace(found, why_not=why_not)
        why_not = why_not or name
    raise AssertionError("A hope is always there.")


def of_same_dates(side: Side, taught: Learned) -> Basis | None:
    """Against the part that would go in without the new one; where it alone tells nothing, against all replaced."""
    for against in dict.fromkeys([(side.old,), side.replaced]):
        lives = at_the_same_time(
            side.component, [side.new], list(against), not_before=side.not_before, as_of=side.as_of
        )
        sides = both_sides(lives)
        if sides is None:
            continue
        before, after = (counted_when_found(each) for each in sides)
        try:
            likely = life_ratio(before, after, probabilities=(0.5,), confidence_level=side.confidence)
            prior = shape_prior(before, after)
            posterior = life_ratio_posterior(before, after, log_shape_prior=prior)
        except StatisticsError:
            continue
        stretch, band, leans = Stretch.of(posterior), band_of(posterior.log_ratios()), prior != LOG_SHAPE_PRIOR
        return Basis(SAME_DATES, stretch, band, likely.median.lower, against, leans=leans)
    return None


def shape_prior(before: Lifetimes, after: Lifetimes) -> tuple[float, float]:
    """A new part that has hardly failed leans on the shape of the old one, as in the forecast."""
    if after.failures >= FEW or before.failures < FEW:
        return LOG_SHAPE_PRIOR
    try:
        return math.log(fit_weibull(before).shape), SHAPE_SPREAD
    except StatisticsError:
        return LOG_SHAPE_PRIOR


def of_all_history(side: Side, taught: Learned) -> Basis | None:
    """Each part as the forecast draws it, from all its lives; told once both have failed."""
    designs = [taught.designs.get(part) for part in (side.new, side.old)]
    if any(design is None or not design.failures for design in designs):
        return None
    medians = []
    for design in designs:
        assert design is not None
        drawn = design.life.drawn
        weibull = np.log(drawn.scales) + np.log(LOG_2) / drawn.shapes
        lognormal = drawn.deviations is not None and drawn.deviations > 0
        medians.append(np.where(lognormal, np.log(drawn.scales), weibull))
    # every draw of the one with every draw of the other: they are drawn apart
    apart = (medians[0][:, None] - medians[1][None, :]).ravel()
    lower = float(np.exp(np.quantile(apart, 0.5 * (1.0 - side.confidence))))
    return Basis(ALL_HISTORY, None, band_of(apart), lower, (side.old,))


def of_hope(side: Side, taught: Learned) -> Basis | None:
    ratio = {"estimate": side.hope, "lower": side.hope, "upper": side.hope}
    return Basis(HOPE, Stretch.known(side.hope), ratio, None, (side.old,))


def band_of(log_ratios: FloatArray) -> dict[str, Any]:
    low, middle, high = np.exp(np.clip(np.quantile(log_ratios, [0.1, 0.5, 0.9]), -50.0, 50.0))
    return {"estimate": finite(float(middle)), "lower": finite(float(low)), "upper": finite(float(high))}


def lives_as(taught: Learned, side: Side, stretch: Stretch | None) -> Learned:
    """The same knowledge, but the new part lives so many times as long as the old one; else they are alike."""
    if stretch is None:
        return taught
    like = taught.designs[side.old]
    old = replace(like, life=InStep(like.life, None))  # type: ignore[arg-type]
    drawn = InStep(like.life, stretch)
    new = replace(like, life=drawn, typical=like.typical * float(np.median(stretch.medians)))  # type: ignore[arg-type]
    return replace(taught, designs={**taught.designs, side.old: old, side.new: new})
