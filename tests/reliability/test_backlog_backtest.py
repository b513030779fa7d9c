"""Past forecasts of the bench: what was there then, what came of it, and what is said where nothing can be judged."""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterator
from typing import Any

import pytest
import time_machine
from django.test import Client

from fleet.models import BenchCapacity, Work
from fleet.work import run_here
from reliability.forecasts.backlog_backtest import (
    NO_HOURS,
    TOO_FEW,
    is_bench_due,
    judge_bench,
    judge_quarter,
    latest_bench,
    open_on,
)
from reliability.forecasts.backtest_quarter import past_quarters
from tests.factories import make_manager
from tests.reliability.supply_fleet import TODAY, SupplyFleet, count_today

pytestmark = pytest.mark.django_db
NOON = dt.datetime.combine(TODAY, dt.time(12), tzinfo=dt.UTC)


@pytest.fixture(autouse=True)
def noon() -> Iterator[None]:
    with time_machine.travel(NOON, tick=False):
        yield


@pytest.fixture
def world() -> SupplyFleet:
    """A job each week for more than a year, each there for ten days, and ten hours a week all along."""
    found = SupplyFleet(modules=6)
    for number in range(66):
        found.job(470 - 7 * number, 460 - 7 * number, reason="noise")
    monday = TODAY - dt.timedelta(days=TODAY.weekday())
    for place in range(-70, 14):
        BenchCapacity.objects.create(week=monday + dt.timedelta(weeks=place), hours=10)
    return found


def nothing(eve: dt.date) -> dict[str, Any]:
    """No component is known: every job comes at the pace seen."""
    return {}


def test_a_quarter_is_judged_by_the_modules_at_its_end(world: SupplyFleet) -> None:
    begin = past_quarters(TODAY, 1)[0]
    told = judge_quarter(begin, nothing)
    found = told["measures"]["backlog"]
    assert found["actual"] == open_on(begin + dt.timedelta(days=90)) in {1, 2}
    assert found["at_first"] == open_on(begin - dt.timedelta(days=1))
    low, high = found["bands"]["0.95"]
    assert low <= found["expected"] <= high
    assert found["expected"] < 6, "ten hours a week are plenty for one job of four"


def test_nothing_of_later_is_in_it(world: SupplyFleet) -> None:
    begin = past_quarters(TODAY, 1)[0]
    before = judge_quarter(begin, nothing)["measures"]["backlog"]
    for ago in range(1, 60, 3):
        world.job(ago, None, reason="noise")
    after = judge_quarter(begin, nothing)["measures"]["backlog"]
    assert (after["pmf"], after["at_first"]) == (before["pmf"], before["at_first"])


def test_what_cannot_be_judged_is_passed_over_with_its_reason(world: SupplyFleet) -> None:
    assert judge_quarter(dt.date(2024, 4, 1), nothing)["passed_over"] == TOO_FEW
    BenchCapacity.objects.all().delete()
    world.manager.bench_hours.all().delete()
    assert judge_quarter(past_quarters(TODAY, 1)[0], nothing)["passed_over"] == NO_HOURS


def test_it_is_kept_told_on_the_page_and_due_once_a_quarter(client: Client, world: SupplyFleet) -> None:
    assert is_bench_due()
    document = judge_bench(2)
    assert document["judged"] == 2
    assert latest_bench()["measures"] == document["measures"]
    assert not is_bench_due()
    assert is_bench_due(TODAY + dt.timedelta(days=100))
    client.force_login(make_manager())
    count_today()
    page = client.get("/bench/backlog/").content.decode()
    assert "How past forecasts of the bench did" in page
    assert "lay within the 80" in page
    assert run_here(Work.objects.create(kind="backtest_bench")).result == {"judged": 0}, "done already"
