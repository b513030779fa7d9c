"""Today: this week and this quarter beside what was to be expected, who sees it, and when it cries."""

from __future__ import annotations

import datetime as dt
import json
from typing import Any

import numpy as np
import pytest
import time_machine
from django.test import Client

from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.models import Work
from fleet.work import run_here
from reliability.forecasts.backtest_quarter import kept_part
from reliability.forecasts.expected_now import KIND, begins, expected_now, reported, thinned
from reliability.forecasts.expected_words import told
from reliability.kept import key_of
from reliability.models import KeptResult
from reliability.stats.hits import poisson_count
from tests.factories import make_crew, make_manager, make_person, make_planner
from tests.reliability.small_fleet import SmallFleet, day
from tests.reliability.test_forecast import AS_OF, lived_fleet

pytestmark = pytest.mark.django_db
TODAY = dt.date(2025, 5, 15)  # a Thursday; day 500
MONDAY, QUARTER = dt.date(2025, 5, 12), dt.date(2025, 4, 7)


def test_the_week_begins_on_monday_and_the_quarter_on_its_first_monday() -> None:
    assert begins(TODAY) == {"week": MONDAY, "quarter": QUARTER}
    assert begins(QUARTER) == {"week": QUARTER, "quarter": QUARTER}
    assert begins(dt.date(2025, 4, 6)) == {"week": dt.date(2025, 3, 31), "quarter": dt.date(2025, 1, 6)}


def keep(code: str, week: float, quarter: float, until: dt.date = TODAY) -> None:
    """An expectation as the worker keeps it, Poisson for once."""
    document: dict[str, Any] = {"until": until.isoformat()}
    for name, mean in (("week", week), ("quarter", quarter)):
        count = poisson_count(mean)
        begin = begins(until)[name].isoformat()
        document[name] = {"from": begin, "expected": mean, "band": list(count.interval(0.8)), "pmf": kept_part(count)}
    KeptResult.objects.create(
        kind=KIND, key=key_of({"component": code}), data_version=0, payload=json.dumps(document).encode()
    )


def failing(days: list[int]) -> SmallFleet:
    """Nuts that failed on these days."""
    fleet = SmallFleet()
    site = fleet.site()
    for number, at in enumerate(days):
        fleet.fit(fleet.module(f"M-{number}", site), 100, at, "failed")
    fleet.fit(fleet.module("RIG-1", fleet.site("TANK", kind="rig")), 100, 499, "failed")
    rebuild_clocks()
    return fleet


def test_what_failed_since_is_counted_for_each_stretch() -> None:
    """Monday is day 497, the quarter began on day 462; a failure of day 461 is none of either."""
    fleet = failing([461, 462, 480, 496, 497, 500])
    keep("NUT", 3.0, 5.0)
    now = expected_now([fleet.component])
    assert now is not None
    assert [(each.stretch, each.count) for each in now.seen] == [("week", 2), ("quarter", 5)]
    assert (now.until, now.missing) == (TODAY, 0)


def test_many_more_than_expected_is_unusual_and_a_few_more_is_not() -> None:
    fleet = failing([497] * 12 + [470])
    keep("NUT", 2.0, 12.0)
    now = expected_now([fleet.component])
    assert now is not None
    assert [(each.stretch, each.unusual, each.more) for each in now.seen] == [
        ("week", True, True),
        ("quarter", False, True),
    ]
    found = told(now, TODAY)
    assert found["answer"] == "Yes, 1\u00a0figure of 2:"
    (said,) = found["unusual"]
    assert said == "Drive nut: 12\u00a0failures since 12\u00a0May 2025, where 0 to 4 were to be expected (80 in 100)."
    assert "fewer than 1 day in 100 among all 2 figures" in found["note"]


def test_fewer_than_expected_is_told_with_the_reports_that_may_come_yet() -> None:
    fleet = failing([470])
    keep("NUT", 1.0, 25.0)
    now = expected_now([fleet.component])
    assert now is not None
    (said,) = told(now, TODAY)["unusual"]
    assert said.endswith("where 19 to 32 were to be expected (80 in 100). Reports may still come in.")


def test_what_is_usually_not_in_the_book_yet_is_not_expected() -> None:
    """Half of all reports come after five days: of seven days' failures 2 + 5 + ... are in, (7 + 2) / 14 of them."""
    assert reported([0] * 10 + [5] * 10, 7) == (9 / 14, 20)
    assert reported([0] * 10 + [90] * 10, 7) == (1.0, 10), "a book filled in afterwards says nothing of reports"
    assert reported([30] * 9, 7) == (1.0, 0), "too few to go by"
    few = thinned(poisson_count(30.0), 9 / 14, 20)
    assert few.mean == pytest.approx(30.0 * (9 / 14 * 20 + 0.5) / 21.0)
    low, high = few.interval(0.8)
    plain = poisson_count(few.mean).interval(0.8)
    assert high - low > plain[1] - plain[0], "the share is not known exactly"


def test_a_late_reported_failure_is_no_seldom_one() -> None:
    fleet = failing([470])
    keep("NUT", 1.0, 25.0)
    row = KeptResult.objects.get(kind=KIND)
    document = json.loads(bytes(row.payload))
    document["quarter"]["reported"] = 0.4
    row.payload = json.dumps(document).encode()
    row.save()
    now = expected_now([fleet.component])
    assert now is not None
    (said,) = told(now, TODAY)["unusual"]
    assert "were to be expected in the book by now (80 in 100). Of all failures of these days about 40 in 100" in said


def test_among_many_one_a_little_out_is_no_alarm() -> None:
    """6 where 2 were expected: by itself 1 in 60 on that side; of 14 figures that is worth a look only."""
    fleet = failing([497] * 6)
    keep("NUT", 2.0, 6.0)
    others = [type(fleet.component).objects.create(code=f"C{number}", clock="days") for number in range(6)]
    for other in others:
        keep(other.code, 0.5, 2.0)
    now = expected_now([fleet.component, *others])
    assert now is not None
    week = next(each for each in now.seen if (each.component, each.stretch) == ("NUT", "week"))
    assert (week.odd, week.unusual) == (True, False)
    found = told(now, TODAY)
    assert found["answer"] == "No: of 7\u00a0components none failed unusually often or seldom."
    assert found["odd_note"] == "Among 14 figures up to 2 so far out are ordinary: worth a look, no alarm."
    assert len(found["odd"]) == 1
    assert len(found["rows"]) == 7


def test_a_right_forecast_seldom_cries_on_any_day() -> None:
    """Counts drawn from the kept expectations themselves: an alarm on at most 1 look in 100."""
    from reliability.forecasts.expected_now import LEVEL, compared

    fleet, rng = SmallFleet(), np.random.default_rng(3)
    others = [type(fleet.component).objects.create(code=f"C{number}", clock="days") for number in range(6)]
    means = {each: (rng.uniform(0.1, 20), rng.uniform(5, 200)) for each in [fleet.component, *others]}
    for each, (week, quarter) in means.items():
        keep(each.code, week, quarter)
    documents = {
        each: json.loads(bytes(KeptResult.objects.get(key=key_of({"component": each.code})).payload)) for each in means
    }
    alarms = 0
    for _ in range(600):
        counts = {
            each.code: (int(rng.poisson(quarter)), int(rng.poisson(week))) for each, (week, quarter) in means.items()
        }
        alarms += any(each.unusual for each in compared(documents, counts))
    assert alarms / 600 <= LEVEL + 0.008


@time_machine.travel(dt.datetime(2025, 5, 15, 12, tzinfo=dt.UTC), tick=False)
def test_the_worker_counts_from_what_was_known_when_the_week_began() -> None:
    fleet = lived_fleet(30)
    assert run_here(Work.objects.create(kind="expect_failures")).result == {"components": 1}
    now = expected_now([fleet.component])
    assert now is not None
    week, quarter = now.seen
    assert (week.begin, quarter.begin) == (MONDAY, QUARTER)
    assert 0.1 < week.expected < quarter.expected < 60
    before = KeptResult.objects.get(kind=KIND).payload
    site = fleet.component.parts.get(code="N1").fittings.first().module.placements.get().site
    for number in range(20):
        fleet.fit(fleet.module(f"LATE-{number}", site), 300, 400, "failed", fitted_known_on=TODAY, known=AS_OF)
    rebuild_clocks()
    run_here(Work.objects.create(kind="expect_failures"))
    assert bytes(KeptResult.objects.get(kind=KIND).payload) == bytes(before)


@pytest.fixture
def shown() -> SmallFleet:
    fleet = failing([497, 500])
    keep("NUT", 3.0, 5.0)
    return fleet


def page(client: Client, person: Any) -> str:
    client.force_login(person)
    with time_machine.travel(dt.datetime(2025, 5, 15, 12, tzinfo=dt.UTC), tick=False):
        return client.get("/").content.decode()


def test_managers_and_planners_of_all_sites_see_it(client: Client, shown: SmallFleet) -> None:
    for person in (make_manager(), make_planner()):
        text = page(client, person)
        assert "none failed unusually often or seldom" in text
        assert "Failures beside what was to be expected" in text


def test_crews_contacts_and_planners_of_some_sites_see_the_records_only(client: Client, shown: SmallFleet) -> None:
    site = shown.component.parts.get(code="N1").fittings.first().module.placements.get().site
    for person in (
        make_crew(site),
        make_person(role="contact", sites=[site]),
        make_person(role="planner", sites=[site]),
    ):
        text = page(client, person)
        assert "since Monday" in text
        assert "expected" not in text


def test_it_says_when_nothing_is_kept_and_when_the_worker_stood_still(client: Client) -> None:
    fleet = failing([500])
    assert "was not counted yet" in page(client, make_manager())
    keep("NUT", 3.0, 5.0, until=dt.date(2025, 5, 8))
    text = page(client, make_manager())
    assert "Counted up to 8\u00a0May 2025: the daily count has not run since." in text
    now = expected_now([fleet.component])
    assert now is not None
    assert (
        "Counted up to 8\u00a0May 2025; today is counted by the next round." in told(now, dt.date(2025, 5, 9))["note"]
    )
    assert "Counted up to" not in told(now, dt.date(2025, 5, 8))["note"]


def test_a_component_that_cannot_be_compared_is_counted_as_missing() -> None:
    fleet = failing([500])
    keep("NUT", 3.0, 5.0)
    other = type(fleet.component).objects.create(code="SEAL", clock="days")
    now = expected_now([fleet.component, other])
    assert now is not None
    assert now.missing == 1
    assert "1\u00a0component could not be compared" in told(now, day(500))["note"]
