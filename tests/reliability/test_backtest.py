"""Past quarters judged: which they are, what was known, what is scored, what is kept and gone on with."""

from __future__ import annotations

import copy
import datetime as dt
import re
from itertools import pairwise
from typing import Any

import pytest

from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.models import DataVersion, Fitting, Work
from fleet.work import Cancelled, run_here
from reliability.forecasts import backtest as module
from reliability.forecasts.backtest import backtest, is_due, latest, latest_line
from reliability.forecasts.backtest_quarter import NO_LIFE, NOTHING_RAN, Stand, judge_quarter, past_quarters
from reliability.forecasts.backtest_summary import summed_up
from reliability.models import KeptResult
from reliability.stats.scoring import crps
from tests.reliability.small_fleet import SmallFleet, day
from tests.reliability.test_forecast import AS_OF, lived_fleet

TODAY = day(AS_OF)  # 15 May 2025
QUARTER = dt.date(2024, 10, 7)


@pytest.mark.parametrize(
    ("today", "last"),
    [
        ("2026-12-01", "2026-07-06"),  # the quarter from 5 October is not over
        ("2027-01-04", "2026-10-05"),  # over on the day that 13 weeks are full
        ("2027-01-03", "2026-07-06"),
        ("2026-07-06", "2026-04-06"),
    ],
)
def test_the_last_quarters_that_are_over(today: str, last: str) -> None:
    found = past_quarters(dt.date.fromisoformat(today), 3)
    assert found[-1].isoformat() == last
    assert all(each.weekday() == 0 and each.day <= 7 and each.month in (1, 4, 7, 10) for each in found)
    assert [(after - before).days for before, after in pairwise(found)] in (
        [91, 91],
        [91, 98],
        [98, 91],
    )


@pytest.fixture(scope="module")
def made(made_once: Any) -> SmallFleet:
    return made_once(lambda: lived_fleet(40))


@pytest.fixture
def fleet(made: SmallFleet) -> SmallFleet:
    return copy.deepcopy(made)


def judged(fleet: SmallFleet, begin: dt.date = QUARTER) -> dict[str, Any]:
    return judge_quarter(Stand(fleet.component, begin))["measures"]["failures"]


@pytest.mark.django_db
def test_a_quarter_is_judged_by_what_happened_in_it(fleet: SmallFleet) -> None:
    found = judged(fleet)
    end = QUARTER + dt.timedelta(days=91)
    happened = Fitting.objects.filter(reason="failed", removed_on__gte=QUARTER, removed_on__lt=end).count()
    assert found["actual"] == happened > 20
    low, high = found["bands"]["0.8"]
    assert found["held"]["0.8"] is (low <= happened <= high)
    assert 0.8 <= found["promised"]["0.8"] <= 1
    assert 0 <= found["pit"] <= 1
    pmf = [0.0] * found["pmf"]["from"] + found["pmf"]["chances"]
    assert found["crps"] == pytest.approx(float(crps([p / sum(pmf) for p in pmf], happened)), rel=1e-3)
    assert sum(count * chance for count, chance in enumerate(pmf)) == pytest.approx(found["expected"], rel=1e-4)


@pytest.mark.django_db
def test_parts_used_are_judged_by_what_went_in(fleet: SmallFleet) -> None:
    """Every nut of this fleet fails and is followed in a position of its own, so nothing went in after another."""
    assert judge_quarter(Stand(fleet.component, QUARTER))["measures"]["parts_used"]["actual"] == 0
    renewed = QUARTER + dt.timedelta(days=3)
    old = fleet.n1.fittings.filter(removed_on__lt=QUARTER).first()
    Fitting.objects.create(code="NEXT", module=old.module, position=old.position, part=fleet.n2, fitted_on=renewed)
    rebuild_clocks()
    found = judge_quarter(Stand(fleet.component, QUARTER))["measures"]["parts_used"]
    assert found["actual"] == 1
    assert found["expected"] > 10


@pytest.mark.django_db
def test_the_rivals_are_the_plain_reckonings(fleet: SmallFleet) -> None:
    """Constant rate by hand: failures so far by days lived so far, times the parts and the 91 days."""
    before = QUARTER - dt.timedelta(days=1)
    failures = days = running = last = 0
    for each in Fitting.objects.all():
        if each.fitted_on > before:
            continue
        over = each.removed_on is not None and each.removed_on <= before
        failures += over
        running += not over
        days += ((each.removed_on if over else before) - each.fitted_on).days
        last += over and each.removed_on >= QUARTER - dt.timedelta(days=91)
    rivals = judged(fleet)["rivals"]
    assert rivals["constant_rate"]["expected"] == pytest.approx(failures / days * running * 91, rel=1e-3)
    assert rivals["last_quarter"]["expected"] == pytest.approx(last, rel=1e-9)


@pytest.mark.django_db
def test_nothing_learned_later_moves_a_past_forecast(fleet: SmallFleet) -> None:
    """Later a removal of before the quarter becomes known, and a fitting, a visit, a stop: only what happened moves."""
    before = judged(fleet)
    site = fleet.component.parts.get(code="N1").fittings.first().module.placements.get().site
    late = QUARTER + dt.timedelta(days=40)
    for number in range(15):
        ada = fleet.module(f"LATE-{number}", site)
        fleet.fit(ada, 100, 200, "failed", fitted_known_on=late, known=(late - day(0)).days)
        fleet.fit(ada, 200, 320, "failed", fitted_known_on=late, known=(late - day(0)).days)
        fleet.visit(ada, 210.5, known=(late - day(0)).days)
        ada.stops.create(stopped_at=dt.datetime(2024, 8, 1, tzinfo=dt.UTC), known_on=late)
    rebuild_clocks()
    after = judged(fleet)
    for name in ("expected", "bands", "pmf"):
        assert after[name] == before[name]
    assert {name: each["expected"] for name, each in after["rivals"].items()} == {
        name: each["expected"] for name, each in before["rivals"].items()
    }
    assert after["actual"] == before["actual"] + 15


@pytest.mark.django_db
def test_the_document_sums_up_what_its_quarters_say(fleet: SmallFleet) -> None:
    (document,) = backtest([fleet.component], 6, today=TODAY)
    assert (document["asked"], document["judged"], document["component"]) == (6, 4, "NUT")
    assert [each["passed_over"] for each in document["passed_over"]] == [NOTHING_RAN, NOTHING_RAN]
    found = document["measures"]["failures"]
    rows = found["quarters"]
    assert [row["from"] for row in rows] == ["2024-04-01", "2024-07-01", "2024-10-07", "2025-01-06"]
    for band in ("0.5", "0.8", "0.95"):
        assert found["hits"][band]["hits"] == sum(row["held"][band] for row in rows)
        assert found["hits"][band]["of"] == 4
    assert found["hits"]["0.8"]["hits"] >= found["hits"]["0.8"]["ordinary"][0]
    assert found["bias"]["actual"] == sum(row["actual"] for row in rows)
    low, high = found["bias"]["bands"]["0.95"]
    assert low < found["bias"]["expected"] < high
    assert found["crps"] == pytest.approx(sum(row["crps"] for row in rows) / 4)
    rate = found["rivals"]["constant_rate"]
    assert rate["more"]["estimate"] == pytest.approx(rate["crps"] - rate["forecast"])
    assert rate["forecast_nearer"] == sum(row["rivals"]["constant_rate"]["crps"] > row["crps"] for row in rows)
    assert "pmf" not in rows[0]


@pytest.mark.django_db
def test_the_first_quarter_has_no_quarter_before_it_to_copy(fleet: SmallFleet) -> None:
    assert judged(fleet, dt.date(2024, 4, 1))["rivals"]["last_quarter"] is None
    rows = [judge_quarter(Stand(fleet.component, each)) for each in (dt.date(2024, 4, 1), QUARTER)]
    assert summed_up("failures", rows)["rivals"]["last_quarter"]["of"] == 1
    assert summed_up("failures", rows)["rivals"]["last_quarter"]["more"] is None


@pytest.mark.django_db
def test_the_same_records_give_the_same_answer(fleet: SmallFleet) -> None:
    first = backtest([fleet.component], 4, today=TODAY)
    DataVersion.raise_version()
    assert backtest([fleet.component], 4, today=TODAY) == first


@pytest.mark.django_db
def test_without_parts_or_lives_there_is_nothing_to_judge() -> None:
    fleet = SmallFleet()
    (document,) = backtest([fleet.component], 4, today=TODAY)
    assert (document["judged"], document["measures"]) == (0, {})
    assert "too young" in (latest_line(fleet.component) or {})["sentence"]
    fleet.fit(fleet.module("ADA", fleet.site(reports_at_once=False)), 10)
    rebuild_clocks()
    assert judge_quarter(Stand(fleet.component, QUARTER))["passed_over"] == NO_LIFE


@pytest.mark.django_db
def test_it_is_kept_until_it_is_made_again_and_says_what_came_after(fleet: SmallFleet) -> None:
    assert latest(fleet.component) is None
    assert latest_line(fleet.component) is None
    (document,) = backtest([fleet.component], 4, today=TODAY)
    kept = latest(fleet.component)
    assert kept is not None
    assert kept["measures"] == document["measures"]
    assert kept["current"] is True
    DataVersion.raise_version()
    line = latest_line(fleet.component)
    assert line is not None
    assert line["current"] is False
    hits = document["measures"]["failures"]["hits"]["0.8"]
    assert line["sentence"].startswith(f"In the last 4 quarters {hits['hits']} actual figure")


@pytest.mark.django_db
def test_it_is_due_once_a_quarter(fleet: SmallFleet) -> None:
    assert is_due(fleet.component, TODAY)
    backtest([fleet.component], 1, today=TODAY)
    assert not is_due(fleet.component, TODAY)
    assert not is_due(fleet.component, dt.date(2025, 7, 6))
    assert is_due(fleet.component, dt.date(2025, 7, 7))  # the quarter from 7 April is over


@pytest.mark.django_db
def test_a_second_attempt_judges_only_what_the_first_left(fleet: SmallFleet, monkeypatch: pytest.MonkeyPatch) -> None:
    judged_ones: list[dt.date] = []
    real = module.judge_quarter
    monkeypatch.setattr(module, "judge_quarter", lambda stand: (judged_ones.append(stand.begin), real(stand))[1])

    def stop_after_two(done: int, total: int, message: str) -> None:
        assert total == 4
        assert re.search(r"drive nut, quarter from \d+.[A-Z][a-z]+ 202\d", message)
        if done == 2:
            raise Cancelled

    work = Work.objects.create(kind="backtest")
    fleet.component.name = "drive nut"
    with pytest.raises(Cancelled):
        backtest([fleet.component], 4, today=TODAY, since=work.made_at, tell=stop_after_two)
    assert latest(fleet.component) is None
    DataVersion.raise_version()  # somebody logs a visit meanwhile
    backtest([fleet.component], 4, today=TODAY, since=work.made_at)
    assert judged_ones == past_quarters(TODAY, 4)  # each once
    backtest([fleet.component], 4, today=TODAY)
    assert len(judged_ones) == 6  # two were of older records and nobody says they are an attempt's of one's own


@pytest.mark.django_db
def test_the_work_keeps_its_answer_and_can_be_refused(fleet: SmallFleet) -> None:
    done = run_here(Work.objects.create(kind="backtest", arguments={"component": "NUT", "quarters": 2}))
    assert (done.state, done.result) == ("done", {"components": ["NUT"]})
    kept = latest(fleet.component)
    assert kept is not None
    assert kept["asked"] == 2
    refused = run_here(Work.objects.create(kind="backtest", arguments={"component": "SAIL"}))
    assert (refused.state, "no component SAIL" in refused.message) == ("failed", True)
    assert run_here(Work.objects.create(kind="backtest_due")).result == {"components": []}
    KeptResult.objects.all().delete()
    assert run_here(Work.objects.create(kind="backtest_due")).result == {"components": ["NUT"]}
