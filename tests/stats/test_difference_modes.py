"""Modes compared one by one: what the redesign changed and what it left."""

from __future__ import annotations

import numpy as np
import pytest

from reliability.stats.competing import cumulative_incidence
from reliability.stats.difference import compare_modes, logrank
from reliability.stats.errors import InvalidArgument
from reliability.stats.lifetimes import Lifetimes


def nuts(rng, count: int = 150) -> tuple[Lifetimes, list[str]]:
    """The new part wears half as fast; water comes in as before."""
    new = np.arange(count) % 2 == 1
    wear = rng.weibull(2.5, count) * np.where(new, 160.0, 80.0)
    water = rng.exponential(200.0, count)
    ends = rng.uniform(40.0, 200.0, count)
    ages = np.ceil(np.minimum(np.minimum(wear, water), ends))
    modes = ["thread wear" if one < other else "water ingress" for one, other in zip(wear, water, strict=True)]
    return Lifetimes(ages, np.minimum(wear, water) <= ends, groups=np.where(new, "new", "old")), modes


def test_wear_has_gone_down_and_water_has_not():
    lives, modes = nuts(np.random.default_rng(71))
    wear, water = compare_modes(lives, modes, 120.0)
    assert (wear.mode, water.mode) == ("thread wear", "water ingress")
    assert wear.groups.tolist() == ["new", "old"]
    assert wear.test.z < -4.0
    assert abs(water.test.z) < 2.0
    assert wear.upper[0] < wear.lower[1]
    assert wear.failures.sum() + water.failures.sum() == lives.failures


def test_each_test_is_the_one_with_the_others_withdrawn():
    lives, modes = nuts(np.random.default_rng(72))
    strata = np.arange(len(lives)) % 3
    for row in compare_modes(lives, modes, 100.0, strata=strata):
        other = np.array([mode != row.mode for mode in modes])
        assert row.test.statistic == logrank(lives.withdrawn_where(other), strata=strata).statistic
        for place, group in enumerate(row.groups):
            own = np.asarray(lives.groups == group)
            curve = cumulative_incidence(lives.subset(own), np.array(modes)[own])
            assert row.incidence[place] == curve.incidence_at(row.mode, 100.0)
            assert (row.lower[place], row.upper[place]) == tuple(map(float, curve.band_at(row.mode, 100.0)))


def test_a_mode_that_one_group_has_not_shown_keeps_an_upper_limit():
    lives = Lifetimes([5, 6, 7, 20, 20, 20, 20], [1, 1, 1, 0, 0, 0, 0], groups=["old"] * 4 + ["new"] * 3)
    (only,) = compare_modes(lives, ["worn"] * 7, 15.0)
    assert only.failures.tolist() == [0.0, 3.0]
    assert only.incidence[0] == only.lower[0] == 0.0
    assert only.upper[0] == pytest.approx(1.0 - 0.025 ** (1 / 3))  # none of three
    assert only.known.all()


def test_a_group_watched_for_too_short_says_nothing():
    lives = Lifetimes([5, 6, 7, 40, 9, 12], [1, 1, 1, 0, 1, 0], groups=["old"] * 4 + ["new"] * 2)
    rows = compare_modes(lives, ["worn", "worn", "broken", "", "worn", ""], 30.0)
    assert [row.mode for row in rows] == ["worn", "broken"]
    assert rows[0].known.tolist() == [False, True]
    assert (rows[0].lower[0], rows[0].upper[0]) == (0.0, 1.0)


def test_a_mode_that_cannot_be_tested_says_why():
    lives = Lifetimes([5, 6, 7, 8], [1, 1, 1, 0], entries=[0, 0, 6.5, 6.5], groups=["old", "old", "new", "new"])
    rows = compare_modes(lives, ["worn", "worn", "broken", ""], 5.5)
    assert all(row.test is None and "Wait for more records" in row.untested for row in rows)


def test_nothing_failed():
    assert compare_modes(Lifetimes([5, 6], [0, 0], groups=["a", "b"]), ["", ""], 4.0) == []


@pytest.mark.parametrize("horizon", [0.0, np.nan, np.inf])
def test_refusals(horizon):
    lives = Lifetimes([5, 6], [1, 0], groups=["a", "b"])
    with pytest.raises(InvalidArgument, match="above 0"):
        compare_modes(lives, ["x", ""], horizon)
    with pytest.raises(InvalidArgument, match="Give groups"):
        compare_modes(Lifetimes([5], [1]), ["x"], 4.0)
