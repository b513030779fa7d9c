"""Life documents made from life data alone, without records: what charts, words and pages are tried on."""

from __future__ import annotations

import datetime as dt
from typing import Any

import numpy as np

from reliability.fleet_lives import FleetLives, LeftOut
from reliability.life_answer import document_of
from reliability.stats.lifetimes import Lifetimes

AS_OF = dt.date(2026, 3, 9)


def document(groups: dict[str, Lifetimes], *, by: str | None = "part", confidence: float = 0.95, **fields: Any) -> Any:
    """The answer for some groups of lives; what did not fail counts as running."""
    labels = np.concatenate([np.full(len(lives), name) for name, lives in groups.items()])
    joined = Lifetimes(
        np.concatenate([lives.durations for lives in groups.values()]),
        np.concatenate([lives.observed for lives in groups.values()]),
        entries=np.concatenate([lives.entries for lives in groups.values()]),
        last_good=np.concatenate([lives.last_good for lives in groups.values()]),
        weights=np.concatenate([lives.weights for lives in groups.values()]),
        sites=np.concatenate([sites_of(lives) for lives in groups.values()]),
        groups=labels,
    )
    found = FleetLives(
        component="PUMP",
        component_name="pump",
        clock=fields.pop("clock", "hours"),
        as_of=AS_OF,
        by=by,
        lifetimes=joined,
        states=np.where(joined.observed, "failed", "running"),
        left_out=[LeftOut("fitting day not known", 3)],
        groups=tuple(groups),
        **fields,
    )
    return document_of(found, confidence)


def sites_of(lives: Lifetimes) -> Any:
    return np.full(len(lives), "LOCK") if lives.sites is None else lives.sites


def withdrawn(*ages: float) -> Lifetimes:
    return Lifetimes(np.array(ages, dtype=float), np.zeros(len(ages), dtype=bool))


def failed(*ages: float) -> Lifetimes:
    return Lifetimes(np.array(ages, dtype=float), np.ones(len(ages), dtype=bool))


def some(count: int, shape: float, scale: float, seed: int = 7, sites: int = 1) -> Lifetimes:
    """Weibull lives seen up to twice their scale, at so many sites."""
    rng = np.random.default_rng(seed)
    ages = np.ceil(scale * rng.weibull(shape, count))
    ends = np.ceil(rng.uniform(0.3 * scale, 2 * scale, count))
    places = np.array([f"S{place}" for place in rng.integers(0, sites, count)])
    return Lifetimes(np.minimum(ages, ends), ages <= ends, sites=places)
