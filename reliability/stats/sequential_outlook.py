"""How long until a redesign is clear at the present pace, and how many more modules would bring it forward."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from reliability.stats.errors import InvalidArgument
from reliability.stats.lifetimes import FloatArray
from reliability.stats.sequential import Look, sequential_boundary

PATHS = 2000


@dataclass(frozen=True, eq=False)
class Outlook:
    """Chances of having been called clear, or shorter, by the end of each coming week, shapes (weeks,).

    A simulation of the present pace going on: no promise.
    """

    clear: FloatArray
    shorter: FloatArray

    def weeks(self, chance: float = 0.5) -> int | None:
        """Weeks until "clear" has been said with the chance; None where it is not reached in the weeks looked at."""
        if not 0.0 < chance < 1.0:
            raise InvalidArgument(f"The chance is {chance:g}; it must lie between 0 and 1.")
        reached = self.clear >= chance
        return int(np.argmax(reached)) + 1 if reached.any() else None

    def clear_by(self, week: int) -> float:
        """Chance of "clear" by the end of the week, counted from 1."""
        if not 1 <= week <= self.clear.size:
            raise InvalidArgument(f"Week {week} lies outside the {self.clear.size} weeks looked at.")
        return float(self.clear[week - 1])


def information_a_week(failures_a_week: ArrayLike, new_share: ArrayLike) -> FloatArray:
    """Log-rank information from failures while a share of the parts at risk is new: failures x share x (1 - share).

    Schoenfeld, Biometrika 68 (1981) 316-319.
    """
    failures, share = np.asarray(failures_a_week, dtype=float), np.asarray(new_share, dtype=float)
    if not ((failures >= 0.0).all() and (share >= 0.0).all() and (share <= 1.0).all()):
        raise InvalidArgument("Failures a week must be at least 0 and the share of new parts between 0 and 1.")
    return failures * share * (1.0 - share)


def outlook(
    look: Look,
    planned: float,
    *,
    weekly_information: ArrayLike,
    effects: ArrayLike,
    weeks: int = 104,
    rng: np.random.Generator | None = None,
) -> Outlook:
    """Chance of each verdict week by week from here on, for a rollout watched weekly.

    The score moves by effect x information + its root x noise (Brownian motion in information). effects: draws of the
    log hazard ratio, old over new (`LifeRatioPosterior.effects`). weekly_information: one number or one a week, shape
    (weeks,). The score by position, where the look has one, gains information in its present proportion, and shares
    the noise as far as both count the same failures. Seeded (rng=None draws the same every time).
    Jennison & Turnbull, Group Sequential Methods (2000), chapter 3.
    """
    rng = np.random.default_rng(17) if rng is None else rng
    steps = np.broadcast_to(np.asarray(weekly_information, dtype=float), (weeks,)) if weeks >= 1 else np.empty(0)
    drifts = np.asarray(effects, dtype=float).ravel()
    if weeks < 1 or not (np.isfinite(steps).all() and (steps >= 0.0).all()):
        raise InvalidArgument("The information gained a week must be at least 0, one number or one for each week.")
    if drifts.size == 0 or not np.isfinite(drifts).all():
        raise InvalidArgument("effects must be at least one number. Take LifeRatioPosterior.effects().")
    drifts = drifts[np.arange(PATHS) * drifts.size // PATHS]
    information = look.information + np.cumsum(steps)
    noise = rng.standard_normal((2, PATHS, weeks))
    scores = [look.score + np.cumsum(drifts[:, None] * steps + np.sqrt(steps) * noise[0], axis=1)]
    variances = [information]
    if look.position_information and look.information > 0.0:
        share = look.position_information / look.information
        common = min(share, 1.0 / share) ** 0.5
        mixed = common * noise[0] + (1.0 - common**2) ** 0.5 * noise[1]
        moved = drifts[:, None] * steps * share + np.sqrt(steps * share) * mixed
        scores.append((look.position_score or 0.0) + np.cumsum(moved, axis=1))
        variances.append(look.position_information + share * np.cumsum(steps))
    boundary = sequential_boundary(information, planned)
    zs = np.stack(
        [score / np.sqrt(np.maximum(variance, 1e-300)) for score, variance in zip(scores, variances, strict=True)]
    )
    # looks after the planned information has been reached change nothing
    used = np.append(True, information[:-1] < planned) & (look.information < planned)
    above, below = (zs.min(axis=0) >= boundary) & used, (zs.max(axis=0) <= -boundary) & used
    first_above, first_below = (_first(crossed, weeks) for crossed in (above, below))
    weeks_from_0 = np.arange(weeks)
    clear = np.where(first_above < first_below, first_above, weeks)
    shorter = np.where(first_below < first_above, first_below, weeks)
    return Outlook(*((times[:, None] <= weeks_from_0).mean(axis=0) for times in (clear, shorter)))


def _first(crossed: np.ndarray, never: int) -> np.ndarray:
    return np.where(crossed.any(axis=1), crossed.argmax(axis=1), never)


def extra_modules(
    look: Look,
    planned: float,
    *,
    weekly_information: ArrayLike,
    information_a_module: float,
    effects: ArrayLike,
    by_week: int,
    chance: float = 0.8,
    most: int = 10_000,
) -> int | None:
    """Fewest modules upgraded now, beyond the plan, that make "clear" by the week with the chance.

    None: not even `most` would.

    information_a_module: information one more upgraded module adds in a week (its failures a week x share of old parts
    beside it). The same random numbers for every trial, so the answer does not jump.
    """
    if not (np.isfinite(information_a_module) and information_a_module > 0.0):
        raise InvalidArgument(f"The information of a module is {information_a_module:g} a week; it must be above 0.")
    base = np.asarray(weekly_information, dtype=float)

    def enough(modules: int) -> bool:
        weekly = base + modules * information_a_module
        ahead = outlook(look, planned, weekly_information=weekly, effects=effects, weeks=by_week)
        return ahead.clear_by(by_week) >= chance

    if enough(0):
        return 0
    high = 1
    while not enough(high):
        if high >= most:
            return None
        high = min(2 * high, most)
    low = high // 2
    while high - low > 1:
        middle = (low + high) // 2
        low, high = (low, middle) if enough(middle) else (middle, high)
    return high
