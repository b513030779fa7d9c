"""Random fleets: the grouped query, the clocks made again in memory, and the slow reference say the same."""

from __future__ import annotations

import random
from collections import Counter
from typing import Any

import pytest

from fleet.actions.rebuild_clocks import rebuild_clocks
from reliability.fleet_lives import FleetLives
from tests.reliability.slow_reference import Question, Row, as_known, slow_rows
from tests.reliability.small_fleet import SmallFleet
from tests.reliability.told_fleet import tell_module, write_fleet

pytestmark = pytest.mark.django_db
SEEDS = [3, 14, 159]
LATER_THAN_ALL = 900  # a day in the past of whoever runs this, after everything told became known


def told_rows(found: FleetLives) -> Counter[Row]:
    rows: Counter[Row] = Counter()
    if found.lifetimes is not None:
        data = found.lifetimes
        columns = (found.states, data.entries, data.durations, data.last_good, data.weights)
        for state, entry, age, good, weight in zip(*(column.tolist() for column in columns), strict=True):
            rows[None, state, entry, age, None if good != good else good] += int(weight)
    return rows


def kept_rows(rows: Counter[Row]) -> Counter[Row]:
    return Counter({row: count for row, count in rows.items() if row[0] is None})


def reasons(rows: Counter[Row]) -> Counter[str]:
    left: Counter[str] = Counter()
    for (reason, *_), count in rows.items():
        if reason is not None:
            left[reason] += count
    return left


CHOICES: list[dict[str, Any]] = [
    {},
    {"with_rigs": True},
    {"worn_is_failure": False},
    {"modes": ("WORN",)},
    {"clock": "strokes"},
    {"clock": "strokes", "with_rigs": True, "worn_is_failure": False},
]


@pytest.mark.parametrize("seed", SEEDS)
def test_query_and_reference_agree(seed: int) -> None:
    rng = random.Random(seed)
    modules = [tell_module(rng, f"M-{number}") for number in range(14)]
    fleet = SmallFleet()
    write_fleet(fleet, modules)
    rebuild_clocks()
    for as_of in (30, 131, 300):
        for choice in CHOICES:
            expected = slow_rows(modules, Question(as_of, **choice))
            found = fleet.lives(as_of, rebuild=False, **choice)
            assert told_rows(found) == kept_rows(expected), (as_of, choice)
            assert Counter({row.reason: row.count for row in found.left_out}) == reasons(expected), (as_of, choice)
            assert all(row.query.count() == row.count for row in found.left_out)


@pytest.mark.parametrize("seed", SEEDS)
def test_clocks_made_again_in_memory_agree_where_all_is_known(seed: int) -> None:
    rng = random.Random(seed + 1000)
    modules = [tell_module(rng, f"M-{number}") for number in range(10)]
    fleet = SmallFleet()
    write_fleet(fleet, modules)
    rebuild_clocks()
    for as_of in (131, 300):
        for choice in CHOICES:
            query = fleet.lives(as_of, rebuild=False, **choice)
            memory = fleet.lives(as_of, known_on=LATER_THAN_ALL, rebuild=False, **choice)
            assert told_rows(memory) == told_rows(query), (as_of, choice)
            assert [(row.reason, row.count) for row in memory.left_out] == [
                (row.reason, row.count) for row in query.left_out
            ]


@pytest.mark.parametrize("seed", SEEDS)
def test_nothing_that_became_known_later_leaks_in(seed: int) -> None:
    rng = random.Random(seed + 2000)
    modules = [tell_module(rng, f"M-{number}") for number in range(12)]
    fleet = SmallFleet()
    write_fleet(fleet, modules)
    rebuild_clocks()
    for as_of in (97, 204):
        expected = slow_rows(as_known(modules, as_of), Question(as_of))
        found = fleet.lives(as_of, known_on=as_of, rebuild=False)
        assert told_rows(found) == kept_rows(expected)
        assert Counter({row.reason: row.count for row in found.left_out}) == reasons(expected)


def test_random_fleets_hold_every_case() -> None:
    """The comparison proves something only where every rule is met."""
    seen: Counter[Any] = Counter()
    for seed in SEEDS:
        rng = random.Random(seed)
        modules = [tell_module(rng, f"M-{number}") for number in range(14)]
        for as_of in (30, 131, 300):
            for row, count in slow_rows(modules, Question(as_of, clock="days")).items():
                seen[row[0] or row[1]] += count
                seen["interval"] += count * (row[4] is not None)
                seen["late entry"] += count * bool(row[2])
    missing = {"failed", "withdrawn", "not known", "running", "interval", "late entry", "on a test stand"} - set(seen)
    missing |= {"fitting day not known", "ended before records were kept", "nothing observed yet: age 0"} - set(seen)
    assert not missing
