"""Seeded fleets whose true life is known, written down as crews would: the fit gets it back, whatever the habits."""

from __future__ import annotations

import random

import pytest

from fleet.models import Module
from reliability.stats.weibull_fit import WeibullFit, fit_weibull
from tests.reliability.small_fleet import SmallFleet, day

pytestmark = pytest.mark.django_db
SHAPE, SCALE, MODULES, LAST = 2.0, 60.0, 60, 360


@pytest.fixture
def fleet() -> SmallFleet:
    return SmallFleet()


def lives_of_one_position(rng: random.Random, begun: float) -> list[tuple[float, float]]:
    """Exact instants of fitting and failure, each failure mended at once, until the last day."""
    lives = []
    while begun < LAST:
        end = begun + rng.weibullvariate(SCALE, SHAPE)
        lives.append((begun, end))
        begun = end
    return lives


def fitted(fleet: SmallFleet, as_of: int = LAST, known_on: int | None = None) -> WeibullFit:
    found = fleet.lives(as_of, known_on=known_on)
    assert found.lifetimes is not None
    return fit_weibull(found.lifetimes)


def check(fit: WeibullFit) -> None:
    """Within three standard errors, which a wrong rule leaves far behind."""
    assert abs(fit.shape - SHAPE) < 3 * fit.covariance[0, 0] ** 0.5, fit
    assert abs(fit.scale - SCALE) < 3 * fit.covariance[1, 1] ** 0.5, fit


def test_failures_reported_at_once(fleet: SmallFleet) -> None:
    rng, lock = random.Random(1), fleet.site()
    for number in range(MODULES):
        module = fleet.module(f"M-{number}", lock)
        for begun, end in lives_of_one_position(rng, rng.uniform(0, 200)):
            if end < LAST:
                fleet.fit(module, int(begun), int(end), "failed")
            else:
                fleet.fit(module, int(begun))
    check(fitted(fleet))


def test_failures_that_reach_the_office_late(fleet: SmallFleet) -> None:
    """Seen from a day on which the last failures are not known yet."""
    rng, lock = random.Random(2), fleet.site()
    for number in range(MODULES):
        module = fleet.module(f"M-{number}", lock)
        known = 0
        for begun, end in lives_of_one_position(rng, rng.uniform(0, 200)):
            fitted_known, known = max(int(begun), known), int(end + rng.expovariate(1 / 6))
            ended = {"removed": int(end), "reason": "failed", "known": known} if end < LAST else {}
            fleet.fit(module, int(begun), fitted_known_on=day(fitted_known), **ended)
    check(fitted(fleet, as_of=300, known_on=300))


def test_failures_found_only_at_visits(fleet: SmallFleet) -> None:
    rng, weir = random.Random(3), fleet.site("WEIR", reports_at_once=False)
    for number in range(MODULES):
        module = fleet.module(f"M-{number}", weir)
        begun: float = 0.0
        fails = begun + rng.weibullvariate(SCALE, SHAPE)
        visit = rng.uniform(5, 40)
        while visit < LAST:
            fleet.visit(module, visit)
            if fails <= visit:
                fleet.fit(module, int(begun), int(visit), "failed")
                begun, fails = visit, visit + rng.weibullvariate(SCALE, SHAPE)
            visit += rng.uniform(15, 45)
        fleet.fit(module, int(begun))
    check(fitted(fleet))


def test_records_that_began_late(fleet: SmallFleet) -> None:
    """Removals before day 150 were not written down; the parts that were in then have their fitting day."""
    rng = random.Random(4)
    mill = fleet.site("MILL", records_from=day(150))
    for number in range(MODULES):
        module: Module = fleet.module(f"M-{number}", mill)
        for begun, end in lives_of_one_position(rng, rng.uniform(0, 60)):
            if int(end) <= 150:
                continue
            if end < LAST:
                fleet.fit(module, int(begun), int(end), "failed")
            else:
                fleet.fit(module, int(begun))
    check(fitted(fleet))


def test_stops_take_no_life(fleet: SmallFleet) -> None:
    """Each module stands still for half of its first hundred days."""
    rng, lock = random.Random(5), fleet.site()
    for number in range(MODULES):
        module = fleet.module(f"M-{number}", lock)
        for start in range(0, 100, 20):
            fleet.stop(module, start, start + 10)
        for begun, end in lives_of_one_position(rng, 0.0):
            if in_calendar(end) < LAST:
                fleet.fit(module, int(in_calendar(begun)), int(in_calendar(end)), "failed")
            else:
                fleet.fit(module, int(in_calendar(begun)))
                break
    check(fitted(fleet))


def in_calendar(served: float) -> float:
    """The instant by which so many days were served."""
    if served >= 50:
        return served + 50
    return served + 10 * (int(served // 10) + 1)
