"""Running parts as the lines of a count: what shares a line loses no use, and the rules of a site follow its pace."""

from __future__ import annotations

import random
from collections import defaultdict

import pytest

from reliability.forecasts.positions import MOST_PACES, Place, _shared_paces


def place(site: str, pace: float) -> Place:
    return Place(
        site=site,
        type="A",
        part="N1",
        needed="N1",
        pace=pace,
        rule=60.0,
        rule_per_pace=1.0,
        every=0.0,
        next=0.0,
        down=0.0,
        joins=0.0,
        leaves=float("inf"),
        upgrading=False,
    )


@pytest.mark.parametrize("sites", [3, 50, 100])
def test_shared_paces_lose_no_use_and_stay_few(sites: int) -> None:
    dice = random.Random(4)
    entries = [
        (place(f"S{number % sites}", dice.lognormvariate(6.0, 0.5)), 0.0, 1.0 + number % 2) for number in range(4000)
    ]
    shared = _shared_paces(entries)
    assert len({(each.site, pace) for (each, _, _), pace in zip(entries, shared, strict=True)}) <= max(
        MOST_PACES, 2 * sites
    )
    use: dict[str, list[float]] = defaultdict(lambda: [0.0, 0.0])
    for (each, _, weight), pace in zip(entries, shared, strict=True):
        use[each.site][0] += weight * each.pace
        use[each.site][1] += weight * pace
    for before, after in use.values():
        assert after == pytest.approx(before, rel=1e-9)


def test_paces_of_few_sites_stay_near_their_own() -> None:
    entries = [(place("S", pace), 0.0, 1.0) for pace in (98.0, 100.0, 200.0, 400.0)]
    assert _shared_paces(entries) == pytest.approx([99.0, 99.0, 200.0, 400.0])
