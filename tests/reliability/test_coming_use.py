"""What is used from tomorrow on: counted once a day, kept whole, and shared out to sites and parts."""

from __future__ import annotations

import datetime as dt

import numpy as np
import pytest
import time_machine

from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.models import Component, DataVersion, Redesign, RedesignChange, RolloutStep
from reliability.forecasts.coming_use import keep_use, kept_uses, weeks_for
from reliability.forecasts.next_quarter import forecast_document, question_of
from reliability.forecasts.switching import Switch, all_switches, assumed_switches, move, paced, switched
from tests.reliability.small_fleet import SmallFleet, day
from tests.reliability.supply_fleet import TODAY
from tests.reliability.test_forecast import AS_OF, lived_fleet

pytestmark = pytest.mark.django_db
NOON = dt.datetime.combine(TODAY, dt.time(12), tzinfo=dt.UTC)


@pytest.fixture(autouse=True)
def clock() -> None:
    with time_machine.travel(NOON, tick=False):
        yield


def test_what_is_kept_is_the_forecast_from_tomorrow_on() -> None:
    fleet = lived_fleet(20)
    use = keep_use(fleet.component)
    told = forecast_document(question_of(fleet.component, begin=TODAY + dt.timedelta(days=1), days=91, as_of=TODAY))
    assert use.used["N2"].mean == pytest.approx(told["groups"]["needed"][0]["parts_used"]["mean"], rel=1e-4)
    assert use.failures.mean == pytest.approx(told["total"]["mean"], rel=1e-4)
    assert use.weekly == pytest.approx([week["mean"] for week in told["weeks"]])
    assert use.draws()["N2"].sum(axis=1).mean() == pytest.approx(use.used["N2"].mean, rel=0.02)
    assert not use.draws()["N1"].any(), "no position takes the old part any more: none is used, and that is known"


def test_a_component_without_lives_is_not_known_and_draws_nothing() -> None:
    fleet = SmallFleet()
    fleet.fit(fleet.module("M-1", fleet.site()), None)
    use = keep_use(fleet.component)
    assert use.known or use.draws() == {}


def test_pages_read_and_never_count_unless_they_may() -> None:
    lived_fleet(6)
    assert kept_uses(Component.objects.all(), count=False) == {}
    counted = kept_uses(Component.objects.all(), count=True)["NUT"]
    DataVersion.raise_version()
    read = kept_uses(Component.objects.all(), count=False)["NUT"]
    assert read.counted_at == counted.counted_at
    assert (counted.current, read.current) == (True, False)


def test_the_weeks_reach_over_the_longest_lead_time_and_a_review() -> None:
    fleet = SmallFleet()
    assert weeks_for(fleet.component) == 13
    fleet.n1.lead_time_days = 150
    fleet.n1.save()
    assert weeks_for(fleet.component) == 24  # 150 and 14 days


def test_sites_share_a_parts_use_by_their_own_uses() -> None:
    use = keep_use(lived_fleet(20).component)
    at_sites = use.use_at_sites("N2")
    assert set(at_sites) == {"LOCK", "WEIR"}
    assert sum(at_sites.values()) == pytest.approx(use.used["N2"].mean)
    assert use.use_at_sites("N1") == {}


def test_pieces_go_over_with_the_share_of_their_week() -> None:
    use = {"A": np.full((4000, 2), 10), "B": np.zeros((4000, 2), dtype=np.int64)}
    move(use, Switch("NUT", "A", "B", (0.25, 1.0), (3,)), seed=1)
    assert use["A"].mean(axis=0) == pytest.approx([7.5, 0.0], abs=0.1)
    assert use["B"].mean(axis=0) == pytest.approx([5.5, 10.0], abs=0.1)
    assert (use["A"] + use["B"] == [13, 10]).all(), "nothing is lost on the way"


def test_changes_at_a_pace_end_when_nothing_is_left() -> None:
    assert paced(5, 2.0, 0.0, 4) == (2, 2, 1, 0)
    assert paced(5, 0.5, 1.0, 4) == (0, 0, 1, 0)
    assert paced(5, 0.0, 0.0, 2) == (0, 0)


def test_from_the_assumed_day_on_every_position_takes_the_new_part() -> None:
    use = keep_use(lived_fleet(20).component)
    begin = use.begin + dt.timedelta(days=14)
    (switch,) = assumed_switches(use, "N1", begin)
    assert switch.old == "N2"
    drawn = switched([use], [switch])
    assert not drawn["N2"][:, 2:].any()
    assert not drawn["N1"][:, :2].any()
    assert (drawn["N1"] + drawn["N2"] == use.draws()["N2"]).all()


def test_a_rollout_plan_moves_the_use_on_its_days_and_adds_what_it_changes() -> None:
    fleet = lived_fleet(20)
    use = keep_use(fleet.component)
    n3 = fleet.n2.__class__.objects.create(code="N3", component=fleet.component, supersedes=fleet.n2)
    redesign = Redesign.objects.create(code="LIP")
    change = RedesignChange.objects.create(redesign=redesign, new_part=n3)
    change.replaces.set([fleet.n2])
    assert all_switches({"NUT": use}) == []
    for module in fleet.type.modules.all():
        RolloutStep.objects.create(redesign=redesign, module=module, planned_on=day(AS_OF + 20))
    (switch,) = all_switches({"NUT": use})
    holding = fleet.component.parts.get(code="N2").fittings.filter(removed_on=None).count()
    assert switch.pieces[2] == sum(switch.pieces) == holding
    drawn = switched([use], [switch])
    assert not drawn["N2"][:, 4:].any() or switch.share[4] < 1
    assert drawn["N3"][:, 2].mean() > holding - 1e-9


def test_a_part_of_which_none_failed_is_told_by_its_band_alone() -> None:
    """An expected use would rest on the prior alone."""
    from reliability.forecasts.kept_order import order_document

    fleet = SmallFleet()
    for number in range(8):
        fleet.fit(fleet.module(f"M-{number}", fleet.site(f"S-{number}")), 0)
    rebuild_clocks()
    (line,) = (line for line in order_document("EUR")["lines"] if line["part"] == "N1")
    assert line["none_failed"]
    assert "None has failed so far" in " ".join(line["reasons"])
    assert "about" not in line["reasons"][1].partition("days,")[2]
