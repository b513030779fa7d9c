"""Lives one by one, and lives that are looked at only from the day on which a site began with a new design."""

from __future__ import annotations

from collections.abc import Iterable

import pytest

from fleet.actions.rebuild_clocks import rebuild_clocks
from reliability.lives_of_positions import PositionLife, first_fitted, lives_of_positions
from tests.reliability.small_fleet import SmallFleet, day

pytestmark = pytest.mark.django_db


def told(rows: Iterable[PositionLife]) -> list[tuple[str, float | None, float | None, str | None]]:
    return sorted(
        ((row.state, row.entry, row.duration, row.left_out) for row in rows), key=lambda row: (row[:3], row[3] or "")
    )


def test_each_life_keeps_its_position_and_part() -> None:
    fleet = SmallFleet()
    site = fleet.site()
    module = fleet.module("K-1", site)
    old = fleet.fit(module, 0, 40, "failed", mode=fleet.worn)
    new = fleet.fit(module, 40, part=fleet.n2)
    rebuild_clocks()
    rows = lives_of_positions(fleet.component, as_of=day(100), also="mode")
    assert {(row.position, row.part, row.state, row.duration, row.also) for row in rows} == {
        (old.position_id, fleet.n1.pk, "failed", 40, fleet.worn.pk),
        (new.position_id, fleet.n2.pk, "running", 60, None),
    }
    assert {row.site for row in rows} == {site.pk}


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
    rows = lives_of_positions(fleet.component, as_of=day(100), starts={begun.pk: day(50)})
    assert told(rows) == [
        ("failed", 0, 20, None),
        ("failed", 0, 20, None),
        ("failed", 40, 70, None),
        ("failed", 50, 51, "ended before records were kept"),
        ("running", 20, 70, None),
    ]


def test_a_later_start_of_records_stays_the_later() -> None:
    fleet = SmallFleet()
    site = fleet.site(records_from=day(60))
    fleet.fit(fleet.module("K-1", site), 10, 80, "failed")
    rebuild_clocks()
    rows = lives_of_positions(fleet.component, as_of=day(100), starts={site.pk: day(50)})
    assert told(rows) == [("failed", 50, 70, None)]


def test_strokes_at_the_start_lie_between_the_readings() -> None:
    fleet = SmallFleet("strokes")
    site = fleet.site()
    module = fleet.module("K-1", site)
    fleet.fit(module, 0, 80, "failed")
    for number, strokes in ((0, 0), (40, 4000), (80, 20_000)):
        fleet.read(module, number + 0.5, strokes=strokes)
    rebuild_clocks()
    rows = lives_of_positions(fleet.component, as_of=day(100), starts={site.pk: day(60)})
    # The day begins at midnight, 19.5 of the 40 days after the reading.
    assert told(rows) == [("failed", 11_800, 20_000, None)]


def test_the_first_day_of_a_design_at_each_site() -> None:
    fleet = SmallFleet()
    site, other = fleet.site(), fleet.site("WEIR")
    module, elsewhere = fleet.module("K-1", site), fleet.module("K-2", other)
    fleet.fit(module, 5)
    for number in (40, 30, 90):
        fleet.fit(module, number, part=fleet.n2)
    fleet.fit(elsewhere, 60, part=fleet.n2, struck_out="wrong module")
    rebuild_clocks()
    assert first_fitted("NUT", ["N2"], day(80)) == {site.pk: day(30)}
