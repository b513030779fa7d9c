"""What makes a million lives quick changes no answer: the looks, and the lives in one row or in many."""

from __future__ import annotations

import random

import numpy as np
import pytest

from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.models import Fitting
from reliability.redesigns import evidence
from reliability.redesigns.compared import AFTER, BEFORE, Compared, all_history, at_the_same_time
from reliability.redesigns.watching import looks_of
from reliability.stats.difference import counted_when_found, life_ratio, logrank
from tests.reliability.rollout_fleet import TODAY, RolloutFleet
from tests.reliability.slow_lives import slow_looks
from tests.reliability.small_fleet import SmallFleet, day
from tests.reliability.told_fleet import tell_module, write_fleet

pytestmark = pytest.mark.django_db


def sides(fleet: SmallFleet, as_of: int = TODAY) -> tuple[Compared, Compared]:
    asked = (fleet.component, ["N2"], ["N1"])
    return at_the_same_time(*asked, as_of=day(as_of)), all_history(*asked, as_of=day(as_of))


def told_fleet(seed: int) -> SmallFleet:
    """Stops, depots, moves between sites, failures found late, strokes: whatever records may hold."""
    rng = random.Random(seed)
    fleet = SmallFleet("strokes" if seed % 2 else "days")
    write_fleet(fleet, [tell_module(rng, f"M-{number}") for number in range(20)])
    for fitting in Fitting.objects.filter(fitted_on__gte=day(100)).order_by("code"):
        if rng.random() < 0.6:
            fitting.part = fleet.n2
            fitting.save()
    rebuild_clocks()
    return fleet


def same_looks(lives: Compared, whole: Compared) -> int:
    found, slow = looks_of(lives, whole), slow_looks(lives, whole)
    assert [look.label for look in found] == [look.label for look in slow]
    for name in ("score", "information", "position_score", "position_information"):
        wanted = [getattr(look, name) for look in slow]
        assert [getattr(look, name) for look in found] == pytest.approx(wanted, rel=1e-9, abs=1e-9), name
    return len(found)


@pytest.mark.parametrize("seed", [3, 8])
def test_all_looks_in_one_pass_are_those_taken_one_by_one(seed: int) -> None:
    assert same_looks(*sides(RolloutFleet(1.2, seed=seed))) == 29


@pytest.mark.parametrize("seed", [3, 8, 14, 159])
def test_the_looks_of_fleets_of_every_kind(seed: int) -> None:
    lives, whole = sides(told_fleet(seed), 300)
    assert lives.starts
    assert same_looks(lives, whole) > 10


def test_the_test_by_position_leaves_only_out_what_adds_nothing() -> None:
    _, whole = sides(RolloutFleet(1.3))
    rows = counted_when_found(whole.lifetimes)
    strata = [f"{place} {site}" for place, site in zip(whole.positions, rows.sites, strict=True)]
    slow = logrank(rows, strata=strata)
    score, variance = evidence.by_position(whole)
    assert score == pytest.approx(-slow.score[0], rel=1e-9)
    assert variance == pytest.approx(slow.variance, rel=1e-9)


def test_lives_in_one_row_say_what_they_say_one_by_one() -> None:
    lives, _ = sides(RolloutFleet(1.3))
    assert len(lives.pooled) < len(lives.lifetimes)
    assert lives.pooled.count == len(lives.lifetimes)
    for side in (BEFORE, AFTER):
        rows = lives.lifetimes.subset(lives.lifetimes.groups == side)
        assert lives.side(side).exposure == rows.exposure
        assert lives.side(side).failures == rows.failures
    one_by_one = [lives.lifetimes.subset(lives.lifetimes.groups == side) for side in (BEFORE, AFTER)]
    slow, quick = life_ratio(*one_by_one), life_ratio(lives.side(BEFORE), lives.side(AFTER))
    assert quick.median.lower == pytest.approx(slow.median.lower, rel=1e-7)
    assert quick.b10.upper == pytest.approx(slow.b10.upper, rel=1e-7)
    rows, modes = lives.pooled_by_mode()
    assert rows.weights[modes == "WORN"].sum() == (lives.modes == "WORN").sum()


def test_where_nothing_can_be_compared_the_words_are_those_of_the_test() -> None:
    notes: list[str] = []
    lives, _ = sides(RolloutFleet(1.3))  # over the same dates hardly a position holds both
    found = evidence.log_rank_tests(lives, notes)
    assert [row["z"] for row in found][1] is None
    assert any("nothing can be compared" in note for note in notes)
    assert np.isfinite([row["z"] for row in found if row["z"] is not None]).all()
