"""Bands from drawing whole sites again."""

from __future__ import annotations

import numpy as np
import pytest

from reliability.stats.errors import InvalidArgument, UndefinedEstimate, UnsupportedRows
from reliability.stats.kaplan_meier import kaplan_meier
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.site_bootstrap import site_bootstrap, site_bootstrap_band
from reliability.stats.weibull_fit import fit_weibull
from tests.stats import reference
from tests.stats.test_site_spread import site_lives


def test_every_draw_is_kaplan_meier_of_the_drawn_sites():
    # the band's matrix product against one curve after another, with the same draws
    lives = site_lives(np.random.default_rng(1), 0.5, sites=6, each=8, late=True)
    ages = np.array([60.0, 90.0])
    band = site_bootstrap_band(lives, ages, replicates=60, rng=np.random.default_rng(3))
    curves = site_bootstrap(
        lives, lambda drawn: float(_survival(drawn, 90.0)), replicates=60, rng=np.random.default_rng(3)
    )
    stretched = np.log(-np.log(np.clip(curves, 1e-12, 1 - 1e-12)))
    centre = np.log(-np.log(band.survival[1]))
    half = 2.570582 * np.sqrt(6 / 5) * stretched.std()  # Student's t with 5 degrees of freedom at 97.5 %
    assert band.lower[1] == pytest.approx(np.exp(-np.exp(centre + half)), rel=1e-6)
    assert band.survival == pytest.approx(kaplan_meier(lives).survival_at(ages))


def _survival(lives: Lifetimes, age: float) -> float:
    curve = kaplan_meier(lives)
    return float(np.append(1.0, curve.survival)[np.searchsorted(curve.times, age, side="right")])


def test_same_sites_same_band_and_wider_where_sites_differ():
    lives = site_lives(np.random.default_rng(2), 1.0, each=20)
    one, two = site_bootstrap_band(lives), site_bootstrap_band(lives)
    assert (one.lower == two.lower).all()
    assert (one.lower <= one.survival).all()
    assert (one.upper >= one.survival).all()
    curve = kaplan_meier(lives)
    middle = (curve.survival > 0.3) & (curve.survival < 0.8)
    assert ((one.upper - one.lower)[middle] > (curve.upper - curve.lower)[middle]).all()
    assert (one.band, one.sites) == ("site bootstrap", 16)


def test_no_failure_or_one_site_failing_gives_no_nan():
    level = site_bootstrap_band(Lifetimes([5, 6], [0, 0], sites=["a", "b"]), [3.0])
    assert (level.lower[0], level.survival[0], level.upper[0]) == (1.0, 1.0, 1.0)
    one = site_bootstrap_band(Lifetimes([5, 6, 7, 8], [1, 1, 0, 0], sites=list("aabb")))
    assert np.isfinite([one.lower, one.upper]).all()
    ended = site_bootstrap_band(Lifetimes([5, 6, 7, 8], [1, 1, 1, 1], sites=list("aabb")))
    assert np.isfinite([ended.lower, ended.upper]).all()


def test_any_statistic_over_drawn_sites():
    lives = site_lives(np.random.default_rng(4), 0.5)
    medians = site_bootstrap(lives, lambda drawn: fit_weibull(drawn).median, replicates=40)
    assert medians.shape == (40,)
    assert medians.min() < fit_weibull(lives).median < medians.max()


def test_what_cannot_be_drawn_is_refused():
    lives = reference.aml_maintained()
    with pytest.raises(InvalidArgument, match="at least two sites"):
        site_bootstrap_band(lives)
    two = Lifetimes([5, 6, 7], [1, 1, 0], sites=list("abb"))
    with pytest.raises(InvalidArgument, match="confidence level"):
        site_bootstrap_band(two, confidence_level=95)
    with pytest.raises(InvalidArgument, match="at least 20"):
        site_bootstrap(two, lambda drawn: 0.0, replicates=3)
    with pytest.raises(UnsupportedRows, match="turnbull"):
        site_bootstrap_band(Lifetimes([5, 6], [1, 1], last_good=[1, 2], sites=list("ab")))
    with pytest.raises(UndefinedEstimate, match="draws of the sites"):
        site_bootstrap(Lifetimes([5, 5], [1, 1], sites=list("ab")), lambda drawn: fit_weibull(drawn).shape)
