"""The four phrases and nothing else; what crosses, what stands, and what no later look may change."""

from __future__ import annotations

import math

import numpy as np
import pytest

from reliability.stats.difference import Look, planned_information, verdict
from reliability.stats.errors import InvalidArgument
from reliability.stats.sequential import MEANINGS

PLANNED = 40.0


def look(z: float, information: float, position_z: float | None = None, label=None) -> Look:
    if position_z is None:
        return Look(z * math.sqrt(information), information, label=label)
    return Look(z * math.sqrt(information), information, position_z * math.sqrt(20.0), 20.0, label)


def test_the_four_phrases_are_fixed():
    assert set(MEANINGS) == {"clear", "likely", "shorter", "not yet shown"}


@pytest.mark.parametrize(
    ("path", "probability", "phrase"),
    [
        ([look(3.2, 20.0, 3.2)], None, "clear"),  # the boundary at half the information is 3.17
        ([look(3.1, 20.0, 3.2)], 0.99, "likely"),
        ([look(3.2, 20.0, 3.1)], 0.99, "likely"),  # the positions do not agree
        ([look(3.2, 20.0)], None, "clear"),  # no position held both
        ([look(-3.2, 20.0, -3.2)], 0.01, "shorter"),
        ([look(-3.2, 20.0, 0.5)], 0.01, "not yet shown"),
        ([look(1.0, 20.0, 1.0)], 0.9, "not yet shown"),
        ([look(1.0, 20.0, 1.0)], 0.91, "likely"),
        ([look(1.0, 20.0, 1.0)], None, "not yet shown"),
        ([look(0.0, 0.0)], None, "not yet shown"),
    ],
)
def test_one_look(path, probability, phrase):
    found = verdict(path, PLANNED, probability=probability)
    assert found.phrase == phrase
    assert found.meaning == MEANINGS[phrase]
    assert found.final is (phrase in ("clear", "shorter"))


def test_a_crossing_stands_and_is_dated():
    path = [look(1.0, 10.0, label="March"), look(3.6, 18.0, 3.6, label="April"), look(1.0, 30.0, 1.0, label="May")]
    found = verdict(path, PLANNED)
    assert (found.phrase, found.decided_at) == ("clear", "April")
    assert found.z == pytest.approx(3.6)
    assert found.boundary == pytest.approx(2.2414 / math.sqrt(18.0 / 40.0))
    assert found.share == pytest.approx(0.45)


def test_after_the_planned_information_nothing_changes():
    path = [look(1.5, 39.0, 1.5), look(1.6, 41.0, 1.6, label="the end"), look(5.0, 60.0, 5.0)]
    found = verdict(path, PLANNED, probability=0.95)
    assert (found.phrase, found.decided_at, found.final) == ("likely", "the end", True)
    at_the_end = verdict([look(1.5, 39.0, 1.5), look(2.25, 41.0, 2.25)], PLANNED)
    assert at_the_end.phrase == "clear"  # the last look is still a look


def test_one_look_needs_no_list():
    assert verdict(look(3.2, 20.0), PLANNED).phrase == "clear"


def test_refusals():
    with pytest.raises(InvalidArgument, match="at least one"):
        verdict([], PLANNED)
    with pytest.raises(InvalidArgument, match="between 0 and 1"):
        verdict(look(1.0, 1.0), PLANNED, probability=1.5)
    with pytest.raises(InvalidArgument, match="above 0"):
        verdict(look(1.0, 1.0), 0.0)


def test_weekly_looks_at_nothing_rarely_say_clear_or_shorter():
    rng = np.random.default_rng(111)
    planned = planned_information(1.3)
    said = {"clear": 0, "shorter": 0}
    runs = 3000
    for _ in range(runs):
        information = np.cumsum(rng.uniform(0.5, 3.0, 26))
        scores = np.cumsum(rng.standard_normal(26) * np.sqrt(np.diff(information, prepend=0.0)))
        found = verdict([Look(*pair) for pair in zip(scores, information, strict=True)], planned).phrase
        if found in said:
            said[found] += 1
    for count in said.values():
        assert 0.008 < count / runs < 0.027
