"""Chances by mode against plain simulation of what was seen, and the count of parts taken along against its truth."""

from __future__ import annotations

import numpy as np
import pytest

from reliability.forecasts.taken_along import Trigger, parts_taken
from reliability.stats.errors import InvalidArgument
from reliability.stats.scoring import randomised_pit
from reliability.stats.taken_rates import chances_by_mode, mixed_modes


def test_chances_agree_with_worlds_in_which_the_same_was_seen() -> None:
    """Worlds drawn from the prior; of those that show 3 of 4 and 0 of 5, the mean chances and their products."""
    rng = np.random.default_rng(1)
    size = 600_000
    common = rng.beta(0.5, 0.5, size)[:, None]
    alike = 2.0 ** rng.uniform(-2.5, 8.5, size)[:, None]
    chance = rng.beta(np.maximum(alike * common, 1e-9), np.maximum(alike * (1 - common), 1e-9), (size, 2))
    seen = rng.binomial([4, 5], chance)
    same = chance[(seen == [3, 0]).all(axis=1)]
    found = chances_by_mode([3, 0], [1, 5])
    assert found.mean == pytest.approx(same.mean(axis=0), abs=0.01)
    assert found.product == pytest.approx(same.T @ same / len(same), abs=0.01)


def test_a_mode_seen_once_leans_on_the_others_as_far_as_they_agree() -> None:
    agreeing = chances_by_mode([5, 6, 4, 0], [15, 14, 16, 1]).mean[3]
    disagreeing = chances_by_mode([20, 0, 1, 0], [0, 20, 19, 1]).mean[3]
    assert 0.15 < agreeing < 0.27
    assert disagreeing < 0.16


def test_the_chance_of_a_mixed_failure_has_the_mean_and_spread_of_its_parts() -> None:
    """Modes well known: only the mix is not, and its chance spreads as a share of two kinds does."""
    found = chances_by_mode([2000, 0], [0, 2000])
    taken, left = found.of_mix([0.3, 0.7], known=20.0)
    assert taken / (taken + left) == pytest.approx(0.3, abs=0.005)
    assert taken + left == pytest.approx(20.0, rel=0.05)


def test_a_design_with_few_failures_leans_on_the_mix_of_all() -> None:
    mix, known = mixed_modes([[90, 10], [0, 0], [0, 40]], [0.0, 1.0, 0.0])
    assert mix == pytest.approx([90 / 140, 50 / 140], abs=0.01)
    assert known == pytest.approx(4.0)
    mix, known = mixed_modes([[90, 10], [0, 0], [0, 40]], [0.0, 0.0, 1.0])
    assert mix[1] > 0.9
    assert known == pytest.approx(44.0)


def worlds(count: int) -> list[tuple[Trigger, dict[str, float], np.ndarray, int]]:
    """What was seen of two designs that fail by three modes, the failures to come, and the parts these will take."""
    rng = np.random.default_rng(7)
    found = []
    for _ in range(count):
        common, alike = rng.beta(1.0, 3.0), np.exp(rng.uniform(-1.0, 3.0))
        chances = rng.beta(alike * common + 1e-6, alike * (1 - common) + 1e-6, 3)
        sizes = rng.dirichlet([1.0, 1.0, 2.0])
        mixes = rng.dirichlet([2.0, 2.0, 1.0], 2)
        past = [rng.multinomial(number, mix) for number, mix in zip((60, 12), mixes, strict=True)]
        modes = {}
        for mode, seen in enumerate(np.sum(past, axis=0).tolist()):
            some = rng.binomial(seen, chances[mode])
            modes[f"M{mode}"] = [seen - some, *rng.multinomial(some, sizes).tolist()]
        if not sum(sum(each[1:]) for each in modes.values()):
            continue
        means = (5.0, 25.0)
        coming = [rng.multinomial(rng.poisson(mean), mix) for mean, mix in zip(means, mixes, strict=True)]
        some = rng.binomial(np.sum(coming, axis=0), chances).sum()
        parts = int(rng.multinomial(some, sizes) @ [1, 2, 3])
        trigger = Trigger("SCREW", modes, {f"D{n}": each.tolist() for n, each in enumerate(past)})
        number = np.arange(90)
        logs = number * np.log(30.0) - 30.0 - np.cumsum(np.log(np.maximum(number, 1)))
        poisson = np.exp(logs)
        found.append((trigger, {"D0": 5.0, "D1": 25.0}, poisson / poisson.sum(), parts))
    return found


def test_bands_of_parts_taken_along_hold_where_designs_fail_by_other_modes() -> None:
    rng = np.random.default_rng(3)
    own, overall = [], []
    for trigger, coming, failures, parts in worlds(600):
        own.append(float(randomised_pit(parts_taken(trigger, failures, coming=coming), parts, rng)))
        # as if all failures were of one kind
        merged = [sum(column) for column in zip(*trigger.modes.values(), strict=True)]
        alike = Trigger("SCREW", {"": merged}, {"D": [sum(merged)]})
        overall.append(float(randomised_pit(parts_taken(alike, failures), parts, rng)))
    inside = np.mean([0.1 < pit < 0.9 for pit in own])
    assert 0.75 < inside < 0.85
    assert np.mean([0.1 < pit < 0.9 for pit in overall]) < inside - 0.03


def test_refuses_what_are_no_counts() -> None:
    with pytest.raises(InvalidArgument):
        chances_by_mode([1, 2], [1])
    with pytest.raises(InvalidArgument):
        chances_by_mode([-1], [1])
