"""The document that the command, the screen and files are made of."""

from __future__ import annotations

import json
import math
import random
from typing import Any

import pytest

from fleet.actions.rebuild_clocks import rebuild_clocks
from reliability.life_answer import life_document
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.weibull_fit import fit_weibull
from tests.reliability.small_fleet import SmallFleet, day

pytestmark = pytest.mark.django_db
KEYS = {"group", "lives", "failures", "running", "exposure", "curve", "b10", "median", "mean", "weibull"}
CURVE = {"age", "survival", "lower", "upper", "at_risk"}


def ask(fleet: SmallFleet, **choices: Any) -> dict[str, Any]:
    rebuild_clocks()
    return life_document("NUT", as_of=day(400), **choices)


def weibull_age(rng: random.Random, scale: float, shape: float) -> int:
    return max(1, math.ceil(scale * (-math.log(1 - rng.random())) ** (1 / shape)))


@pytest.fixture
def fleet() -> SmallFleet:
    return SmallFleet()


def add_lives(fleet: SmallFleet, site: Any, count: int, scale: float, **fields: Any) -> list[int]:
    rng = random.Random(f"{site.code}{count}")
    ages = [weibull_age(rng, scale, 2.0) for _ in range(count)]
    for number, age in enumerate(ages):
        module = fleet.module(f"{site.code}-{number}", site)
        if 300 + age <= 400:
            fleet.fit(module, 300, 300 + age, "failed", **fields)
        else:
            fleet.fit(module, 300, **fields)
    return ages


def test_one_site_is_an_ordinary_fit_of_independent_lives(fleet: SmallFleet) -> None:
    ages = add_lives(fleet, fleet.site(), 40, 80)
    document = ask(fleet)
    (group,) = document["groups"]
    assert set(group) >= KEYS
    assert set(group["curve"]) >= CURVE
    expected = fit_weibull(Lifetimes([min(age, 100) for age in ages], [age <= 100 for age in ages]))
    assert group["weibull"]["shape"]["estimate"] == pytest.approx(expected.shape)
    assert group["weibull"]["log_likelihood"] == pytest.approx(expected.log_likelihood)
    assert group["weibull"]["method"] == "likelihood-ratio"
    found = expected.interval(("quantile", 0.5))
    assert [group["median"][end] for end in ("estimate", "lower", "upper")] == pytest.approx(
        [found.estimate, found.lower, found.upper]
    )
    assert group["independent"] is None
    assert document["left_out"] == []
    assert document["groups"][0]["group"] == "all"


def test_where_sites_differ_intervals_allow_for_it_and_independent_lives_stand_beside(fleet: SmallFleet) -> None:
    for number, scale in enumerate((30, 60, 90, 150)):
        add_lives(fleet, fleet.site(f"S-{number}"), 25, scale)
    (group,) = ask(fleet)["groups"]
    wide, narrow = group["median"], group["independent"]["median"]
    assert wide["upper"] / wide["lower"] > 1.3 * narrow["upper"] / narrow["lower"]
    assert group["weibull"]["site_spread"]["estimate"] > 0.2
    multipliers = group["weibull"]["site_multipliers"]
    assert multipliers["S-0"] > multipliers["S-3"]


@pytest.mark.parametrize("failures", [0, 1, 4])
def test_few_failures_show_bounds_for_assumed_shapes_and_no_fit(fleet: SmallFleet, failures: int) -> None:
    site = fleet.site()
    for number in range(20):
        module = fleet.module(f"ADA-{number}", site)
        if number < failures:
            fleet.fit(module, 0, 50 + number, "failed")
        else:
            fleet.fit(module, 0)
    (group,) = ask(fleet)["groups"]
    assert (group["weibull"], group["median"], group["b10"]) == (None, None, None)
    bounds = group["few_failures"]["bounds"]
    assert [row["shape"] for row in bounds] == [1.0, 1.5, 2.0, 2.5, 3.0, 4.0, 5.0]
    assert all(row["b10_lower"] > 0 for row in bounds)
    if failures == 0:  # (sum of squares / -log 0.05)^(1/2) (-log 0.9)^(1/2): all 20 ran 400 days
        expected = math.sqrt(20 * 400**2 / -math.log(0.05)) * math.sqrt(-math.log(0.9))
        assert bounds[2]["b10_lower"] == pytest.approx(expected)
    # run to twice the age: log 0.05 / (2^shape log 0.9) = 14.2 without wear, 7.1 at shape 2
    assert [bounds[place]["parts_to_twice"] for place in (0, 2)] == [15, 8]
    assert group["few_failures"]["parts_for_nine_in_ten"] == 29  # log 0.05 / log 0.9 = 28.4, common practice


def test_all_failures_at_one_age_are_told_without_a_fit(fleet: SmallFleet) -> None:
    site = fleet.site()
    for number in range(6):
        fleet.fit(fleet.module(f"ADA-{number}", site), 0, 50, "failed")
    (group,) = ask(fleet)["groups"]
    assert group["weibull"] is None
    assert "no upper limit" in " ".join(group["notes"])
    assert group["few_failures"] is not None


def test_a_limit_that_the_records_do_not_give_is_none_with_a_flag(fleet: SmallFleet) -> None:
    site = fleet.site()
    for number in range(5):
        fleet.fit(fleet.module(f"ADA-{number}", site), 0, 5 + 70 * number, "failed")
    for number in range(400):
        fleet.fit(fleet.module(f"BEN-{number}", site), 100, 101, "planned")
    text = json.dumps(ask(fleet, confidence=0.999), allow_nan=False)
    (group,) = json.loads(text)["groups"]
    for name in ("b10", "median", "mean"):
        for end in ("lower", "upper"):
            assert (group[name][end] is None) <= (end in group[name].get("unbounded", []))


def test_nothing_in_the_records_is_an_empty_list(fleet: SmallFleet) -> None:
    document = ask(fleet)
    assert (document["groups"], document["left_out"], document["warnings"]) == ([], [], [])


def test_the_counts_add_up(fleet: SmallFleet) -> None:
    site = fleet.site()
    for number, reason in enumerate(["failed", "failed", "planned", "upgrade", "not known", ""]):
        module = fleet.module(f"ADA-{number}", site)
        fleet.fit(module, 0, None if not reason else 30 + number, reason)
    (group,) = ask(fleet)["groups"]
    assert (group["lives"], group["failures"], group["running"], group["removed_otherwise"]) == (6, 2, 1, 3)
    assert group["exposure"] == 30 + 31 + 32 + 33 + 34 + 400
    assert group["if_not_known_failed"]["failures"] == 3
