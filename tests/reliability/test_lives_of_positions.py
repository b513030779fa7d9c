"""Lives one by one, and lives that are looked at only from the day on which a site began with a new design."""

from __future__ import annotations

import datetime as dt
import random
from collections import Counter
from typing import Any

import pytest

from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.models import Fitting, Site
from reliability.redesigns.life_columns import STATES
from reliability.redesigns.lives_of_positions import PositionLives, position_records
from tests.reliability.slow_lives import PositionLife, slow_lives
from tests.reliability.small_fleet import SmallFleet, day
from tests.reliability.told_fleet import tell_module, write_fleet

pytestmark = pytest.mark.django_db


def lives(fleet: SmallFleet, as_of: int, starts: dict[int, dt.date] | None = None) -> PositionLives:
    return position_records(fleet.component, ["N1", "N2"], as_of=day(as_of)).lives(starts)


def told(found: PositionLives) -> list[tuple[str, float, float]]:
    states = [STATES[state] for state in found.state.tolist()]
    return sorted(zip(states, found.entry.tolist(), found.duration.tolist(), strict=True))


def test_each_life_keeps_its_position_and_part() -> None:
    fleet = SmallFleet()
    site = fleet.site()
    module = fleet.module("K-1", site)
    old = fleet.fit(module, 0, 40, "failed", mode=fleet.worn)
    new = fleet.fit(module, 40, part=fleet.n2)
    rebuild_clocks()
    found = lives(fleet, 100)
    assert found.part.tolist() == [fleet.n1.pk, fleet.n2.pk]
    assert found.mode.tolist() == [fleet.worn.pk, 0]
    assert told(found) == [("failed", 0, 40), ("running", 0, 60)]
    assert (found.module == module.pk).all()
    assert len(set(found.place.tolist())) == len({old.position_id, new.position_id})
    assert set(found.site.tolist()) == {site.pk}


def test_from_a_sites_start_old_parts_enter_at_their_age_that_day() -> None:
    fleet = SmallFleet()
    begun, other = fleet.site(), fleet.site("WEIR")
    module, elsewhere = fleet.module("K-1", begun), fleet.module("K-2", other)
    fleet.fit(module, 0, 20, "failed")  # ended before the start: not looked at
    fleet.fit(module, 10, 80, "failed")
    fleet.fit(module, 30)
    fleet.fit(module, 50, 70, "failed", part=fleet.n2)
    fleet.fit(elsewhere, 0, 20, "failed")  # no start at its site: as ever
    rebuild_clocks()
    found = lives(fleet, 100, {begun.pk: day(50)})
    assert told(found) == [
        ("failed", 0, 20),
        ("failed", 0, 20),
        ("failed", 40, 70),
        ("running", 20, 70),
    ]
    assert found.left_out == {"ended before records were kept": 1}


def test_a_later_start_of_records_stays_the_later() -> None:
    fleet = SmallFleet()
    site = fleet.site(records_from=day(60))
    fleet.fit(fleet.module("K-1", site), 10, 80, "failed")
    rebuild_clocks()
    found = lives(fleet, 100, {site.pk: day(50)})
    assert told(found) == [("failed", 50, 70)]


def test_strokes_at_the_start_lie_between_the_readings() -> None:
    fleet = SmallFleet("strokes")
    site = fleet.site()
    module = fleet.module("K-1", site)
    fleet.fit(module, 0, 80, "failed")
    for number, strokes in ((0, 0), (40, 4000), (80, 20_000)):
        fleet.read(module, number + 0.5, strokes=strokes)
    rebuild_clocks()
    found = lives(fleet, 100, {site.pk: day(60)})
    # The day begins at midnight, 19.5 of the 40 days after the reading.
    assert told(found) == [("failed", 11_800, 20_000)]


def test_the_first_day_of_a_design_at_each_site() -> None:
    fleet = SmallFleet()
    site, other = fleet.site(), fleet.site("WEIR")
    module, elsewhere = fleet.module("K-1", site), fleet.module("K-2", other)
    fleet.fit(module, 5)
    for number in (40, 30, 90):
        fleet.fit(module, number, part=fleet.n2)
    fleet.fit(elsewhere, 60, part=fleet.n2, struck_out="wrong module")
    rebuild_clocks()
    records = position_records(fleet.component, ["N2"], as_of=day(80))
    assert records.first_fitted([fleet.n2.pk]) == {site.pk: day(30)}


@pytest.mark.parametrize("seed", [3, 14, 159])
@pytest.mark.parametrize("clock", ["days", "strokes"])
def test_columns_and_rows_say_the_same(seed: int, clock: str) -> None:
    """Random fleets that meet every rule, whole and from a day on at each site, against the rules in SQL."""
    rng = random.Random(seed)
    fleet = SmallFleet()
    write_fleet(fleet, [tell_module(rng, f"M-{number}") for number in range(14)])
    rebuild_clocks()
    sites = list(Site.objects.values_list("pk", "code"))
    for as_of in (30, 131, 300):
        records = position_records(fleet.component, ["N1", "N2"], as_of=day(as_of), clock=clock)
        starts = {pk: day(rng.randrange(as_of)) for pk, _ in sites[::2]}
        for begun in ({}, starts):
            for rigs in (False, True):
                chosen = {"as_of": day(as_of), "clock": clock, "parts": ["N1", "N2"], "with_rigs": rigs}
                slow = slow_lives(fleet.component, starts=begun, **chosen)
                found = records.lives(begun, with_rigs=rigs)
                assert rows_of(found) == Counter(told_slowly(row) for row in slow if row.left_out is None)
                assert found.left_out == Counter(row.left_out for row in slow if row.left_out is not None)


def test_some_sites_only() -> None:
    rng = random.Random(8)
    fleet = SmallFleet()
    write_fleet(fleet, [tell_module(rng, f"M-{number}") for number in range(14)])
    rebuild_clocks()
    pk, code = Site.objects.filter(kind="field").values_list("pk", "code").first()
    slow = slow_lives(fleet.component, as_of=day(200), parts=["N1", "N2"], sites=[code])
    found = position_records(fleet.component, ["N1", "N2"], as_of=day(200)).lives(sites=[pk])
    assert found.entry.size > 0
    assert rows_of(found) == Counter(told_slowly(row) for row in slow if row.left_out is None)


def told_slowly(row: PositionLife) -> tuple[Any, ...]:
    good = -1.0 if row.last_good is None else row.last_good
    ages = (row.entry, row.duration, good, row.last_day)
    return (row.module, row.part, row.also or 0, row.state, row.site or 0, row.fitted_day, *ages)


def rows_of(found: PositionLives) -> Counter[tuple[Any, ...]]:
    good = [-1.0 if value != value else value for value in found.last_good.tolist()]
    states = [STATES[state] for state in found.state.tolist()]
    columns = (found.module, found.part, found.mode, states, found.site, found.fitted_day)
    rest = (found.entry, found.duration, good, found.last_day)
    return Counter(zip(*(list(column) for column in (*columns, *rest)), strict=True))


def test_the_order_is_that_of_the_labels_and_not_of_the_books_numbers() -> None:
    fleet = SmallFleet()
    site = fleet.site()
    for tag in ("K-3", "K-1", "K-2"):
        fleet.fit(fleet.module(tag, site), 0, 5, "failed")
    rebuild_clocks()
    found = lives(fleet, 100)
    codes = dict(Fitting.objects.values_list("module_id", "module__code"))
    assert [codes[module] for module in found.module.tolist()] == ["K-1", "K-2", "K-3"]
