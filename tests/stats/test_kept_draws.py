"""Draws that are kept say the same as the posterior they came from, also after a stay in a file."""

from __future__ import annotations

import json

import numpy as np
import pytest

from reliability.stats.kept_draws import KeptDraws
from reliability.stats.life_posterior import LifePosterior, life_posterior
from reliability.stats.lifetimes import Lifetimes


def posterior(count: int = 80) -> LifePosterior:
    rng = np.random.default_rng(2)
    life = np.ceil(60 * rng.weibull(2.0, count))
    watched = rng.integers(20, 100, count)
    sites = np.array(["A", "B", "C"])[np.arange(count) % 3]
    return life_posterior(Lifetimes(np.minimum(life, watched), life <= watched, sites=sites), site_spread=True)


def test_kept_draws_survive_as_text() -> None:
    kept = KeptDraws.of(posterior(), 400, np.random.default_rng(1))
    again = KeptDraws.from_told(json.loads(json.dumps(kept.told())))
    for count in (100, 400, 900):
        one, other = (each.draws(count, np.random.default_rng(3)) for each in (kept, again))
        assert len(one) == count
        assert one.shapes.tolist() == other.shapes.tolist()
        assert one.for_sites(["A", "new"]).tolist() == other.for_sites(["A", "new"]).tolist()
    assert again.has_spread == kept.has_spread
    assert again.failures == kept.failures


def test_fewer_of_them_still_cover_the_posterior() -> None:
    whole = posterior().draws(4000, np.random.default_rng(1))
    some = KeptDraws.of(posterior(), 400, np.random.default_rng(5)).draws(100, np.random.default_rng(3))
    for p in (0.1, 0.5, 0.9):
        assert np.quantile(some.scales, p) == pytest.approx(np.quantile(whole.scales, p), rel=0.03)
        assert np.quantile(some.shapes, p) == pytest.approx(np.quantile(whole.shapes, p), rel=0.06)


def test_two_posteriors_are_not_in_step() -> None:
    """The grid is walked in order; drawn side by side the i-th draws of two designs must not go together."""
    kept = KeptDraws.of(posterior(), 400, np.random.default_rng(1))
    rng = np.random.default_rng(7)
    one, other = kept.draws(400, rng), kept.draws(400, rng)
    assert abs(np.corrcoef(one.scales, other.scales)[0, 1]) < 0.15
