"""Likelihood-ratio limits: quick joint steps against the guarded search, and a spread laid more closely."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from reliability.stats import profile_intervals, site_spread
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.other_fits import fit_lognormal
from reliability.stats.site_likelihood import spread_nodes
from reliability.stats.weibull_fit import fit_weibull
from tests.stats.cases import weibull_lives

QUANTITIES = ("shape", "scale", "mean", "median", ("quantile", 0.1), ("survival", 60.0))


def lives_at_sites(seed: int, count: int) -> Lifetimes:
    rng = np.random.default_rng(seed)
    lives = weibull_lives(rng, count, truncated=True, intervals=True)
    return Lifetimes(
        lives.durations,
        lives.observed,
        entries=lives.entries,
        last_good=lives.last_good,
        sites=rng.integers(0, 5, count),
    )


@pytest.mark.parametrize("count", [8, 25, 120])
@pytest.mark.parametrize("kind", ["weibull", "lognormal", "sites"])
def test_joint_steps_find_what_the_guarded_search_finds(monkeypatch, kind, count):
    lives = lives_at_sites(1, count)
    fit = fit_lognormal(lives) if kind == "lognormal" else fit_weibull(lives, site_spread=kind == "sites")
    quick = {quantity: fit.interval(quantity) for quantity in QUANTITIES}
    found = []
    joint = profile_intervals.limit_by_joint_steps
    monkeypatch.setattr(profile_intervals, "limit_by_joint_steps", lambda *given: found.append(joint(*given)))
    for quantity in QUANTITIES:
        slow = fit.interval(quantity)
        assert quick[quantity].lower == pytest.approx(slow.lower, rel=2e-5, abs=1e-12)
        assert quick[quantity].upper == pytest.approx(slow.upper, rel=2e-5)
        assert (quick[quantity].lower_unbounded, quick[quantity].upper_unbounded) == (
            slow.lower_unbounded,
            slow.upper_unbounded,
        )
    # and it is the quick way that was used, but where few lives leave a side open
    assert sum(limit is not None for limit in found) >= (6 if count == 8 else 11)


@pytest.mark.parametrize("seed", [2, 3, 4])
def test_limits_are_those_of_a_spread_laid_far_more_closely(monkeypatch, seed):
    lives = lives_at_sites(seed, 40)
    usual = fit_weibull(lives, site_spread=True)
    monkeypatch.setattr(
        site_spread, "_refined", lambda likelihood, *_: replace(likelihood, nodes=spread_nodes(1.0, 1e-5, 40.0, 0.05))
    )
    close = fit_weibull(lives, site_spread=True)
    assert usual.spread == pytest.approx(close.spread, rel=1e-3)
    for quantity in QUANTITIES:
        a, b = usual.interval(quantity), close.interval(quantity)
        assert (a.estimate, a.lower, a.upper) == pytest.approx((b.estimate, b.lower, b.upper), rel=1e-4)


def test_nodes_of_the_quadrature_serve_only_near_by():
    # after an evaluation far away the answer at home is what it was, to the digits of the quadrature
    likelihood = fit_weibull(lives_at_sites(5, 60), site_spread=True)._evaluate
    home = (0.7, 0.1)
    before = likelihood(*home)
    far = [likelihood(x, y) for x, y in ((2.5, -4.0), (-1.0, 3.0), (0.7, 6.0))]
    assert all(np.isfinite(value).all() for value in far)
    after = likelihood(*home)
    assert after[0] == pytest.approx(before[0], abs=1e-5)
    assert after[1:] == pytest.approx(before[1:], rel=1e-4, abs=1e-4)
