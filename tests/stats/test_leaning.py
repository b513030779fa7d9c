"""A design with few failures leans on what another one says of its life."""

from __future__ import annotations

import numpy as np
import pytest

from reliability.stats.errors import InvalidArgument
from reliability.stats.leaning import leaning_on_life, log_median
from reliability.stats.life_posterior import life_posterior
from reliability.stats.lifetimes import Lifetimes


def lived(count: int, seen: float, scale: float = 200.0, seed: int = 4) -> Lifetimes:
    life = scale * np.random.default_rng(seed).weibull(2.0, count)
    return Lifetimes(np.minimum(life, seen), life <= seen)


def test_the_log_median_of_many_lives_is_known() -> None:
    mean, deviation = log_median(life_posterior(lived(2000, 300.0)))
    assert mean == pytest.approx(np.log(200.0 * np.log(2.0) ** 0.5), abs=0.05)
    assert deviation < 0.05


def test_without_a_failure_the_life_is_the_prior_cut_by_what_was_survived() -> None:
    """Thirty parts that ran 60 days: against direct integration over shape and median, on a plain grid; the
    posterior's own is coarse where little is known.
    """
    records = Lifetimes([60.0], [0], weights=[30])
    prior = (np.log(170.0), 0.7)
    mean, deviation = log_median(leaning_on_life(life_posterior(records), prior))
    shape, median = np.meshgrid(np.exp(np.linspace(-3.0, 3.6, 500)), np.linspace(1.0, 9.0, 600), indexing="ij")
    exposed = 30 * np.log(2.0) * np.exp(shape * (np.log(60.0) - median))
    weight = np.exp(-exposed - 0.5 * (np.log(shape) - np.log(2.0)) ** 2 - 0.5 * ((median - prior[0]) / prior[1]) ** 2)
    expected = (weight * median).sum() / weight.sum()
    assert mean == pytest.approx(expected, abs=0.1)
    assert deviation == pytest.approx(np.sqrt((weight * (median - expected) ** 2).sum() / weight.sum()), abs=0.1)


def test_its_own_failures_outweigh_it() -> None:
    own = life_posterior(lived(400, 300.0))
    leaned = leaning_on_life(own, (np.log(1000.0), 0.7))
    assert log_median(leaned)[0] == pytest.approx(log_median(own)[0], abs=0.02)
    assert leaned.lognormal_share == pytest.approx(own.lognormal_share, abs=0.05)


def test_refuses_a_prior_without_a_spread() -> None:
    with pytest.raises(InvalidArgument):
        leaning_on_life(life_posterior(lived(20, 100.0)), (5.0, 0.0))
