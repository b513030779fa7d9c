"""How good past forecasts of the bench would have been: modules there at the end of each past quarter.

Failures are forecast from what was known on the evening before the quarter; jobs and hours booked count by their own
days, for nobody kept when they were written down. The hours a week are those that the bench then had, so what is
judged is the forecast given the hours, not the planning of them. As failures are counted before the quarter begins,
all but the calendar was known then.
"""

from __future__ import annotations

import datetime as dt
import hashlib
import json
from collections.abc import Callable
from typing import Any

import numpy as np
from django.db.models import Min, Q
from django.utils import timezone

from fleet.formats import long_day
from fleet.models import BenchJob, Component, DataVersion
from reliability.forecasts.backlog import backlog
from reliability.forecasts.backtest import DAYS, KEPT_FOR, Tell, keep
from reliability.forecasts.backtest_quarter import BANDS, kept_part, past_quarters, scored
from reliability.forecasts.backtest_summary import summed_up
from reliability.forecasts.backtest_works import QUARTERS
from reliability.forecasts.bench_records import bench_records
from reliability.forecasts.coming_use import ComingUse, count_use, question_for, use_of
from reliability.forecasts.horizon import next_quarter
from reliability.kept import key_of
from reliability.lives_as_known import shared_records
from reliability.models import KeptResult
from reliability.stats.count_results import CountDistribution
from reliability.stats.scoring import randomised_pit

KIND, KIND_QUARTER = "bench backtest", "bench backtest quarter"
MEASURE = "backlog"
FEWEST_JOBS = 10  # finished before the quarter: fewer teach no hours
TOO_FEW = "too few jobs had been finished"
NO_HOURS = "the hours of the bench are not known"


def judge_bench(
    quarters: int = QUARTERS,
    *,
    today: dt.date | None = None,
    since: dt.datetime | None = None,
    tell: Tell = lambda done, total, message: None,
) -> dict[str, Any]:
    """Judges and keeps the last quarters; one that was judged for the same data is read."""
    day = today or timezone.localdate()
    begins, version = past_quarters(day, quarters), DataVersion.current()
    found = []
    with shared_records():
        for place, begin in enumerate(begins):
            tell(place, len(begins), f"the bench, quarter from {long_day(begin)}")
            found.append(kept_quarter(begin, version, since))
    judged = [each for each in found if "passed_over" not in each]
    document = {
        "as_of": day.isoformat(),
        "asked": quarters,
        "judged": len(judged),
        "days": DAYS,
        "bands": [f"{band:g}" for band in BANDS],
        "first_after": first_possible(day).isoformat(),
        "passed_over": [each for each in found if "passed_over" in each],
        "measures": {MEASURE: summed_up(MEASURE, judged)} if judged else {},
    }
    keep(KIND, key_of({}), version, document)
    KeptResult.objects.filter(kind=KIND_QUARTER, made_at__lt=timezone.now() - KEPT_FOR).delete()
    return document


def kept_quarter(begin: dt.date, version: int, since: dt.datetime | None) -> dict[str, Any]:
    key = key_of({"begin": begin.isoformat(), "days": DAYS})
    row = KeptResult.objects.filter(kind=KIND_QUARTER, key=key).first()
    if row is not None and (row.data_version == version or (since is not None and row.made_at >= since)):
        return dict(json.loads(bytes(row.payload)))
    quarter = judge_quarter(begin)
    keep(KIND_QUARTER, key, version, quarter)
    return quarter


def judge_quarter(begin: dt.date, count: Callable[..., dict[str, ComingUse]] | None = None) -> dict[str, Any]:
    """Plain values, shaped as those of the other measures; or `passed_over` with the reason."""
    eve, end = begin - dt.timedelta(days=1), begin + dt.timedelta(days=DAYS - 1)
    done = BenchJob.objects.standing().filter(finished_on__lte=eve).count()
    told = {"from": begin.isoformat()}
    if done < FEWEST_JOBS:
        return {**told, "passed_over": TOO_FEW}
    bench = bench_records((count or uses_then)(eve), as_of=eve, days=DAYS).bench
    if bench is None:
        return {**told, "passed_over": NO_HOURS}
    course = backlog(bench, with_needed=False).course
    modules = np.bincount(course.modules.values[:, -1])
    distribution, actual = CountDistribution(modules / modules.sum()), open_on(end)
    seed = hashlib.sha256(f"bench {begin}".encode()).digest()[:8]
    rng = np.random.default_rng(int.from_bytes(seed, "big"))
    return {
        **told,
        "until": (end + dt.timedelta(days=1)).isoformat(),
        "as_of": eve.isoformat(),
        "positions": len(bench.jobs),
        "in_modules_that_came_later": 0,
        "measures": {
            MEASURE: {
                **scored(distribution, actual),
                "median": distribution.quantile(0.5),
                "failures_known": done,
                "actual": actual,
                "at_first": len(bench.jobs),
                "pit": float(randomised_pit(distribution.pmf, actual, rng)),
                "pmf": kept_part(distribution),
                "rivals": {},
            }
        },
    }


def uses_then(eve: dt.date) -> dict[str, ComingUse]:
    """Every component counted from what was known on that evening."""
    return {
        each.code: use_of(each.code, count_use(question_for(each, eve, known_on=eve)), timezone.now(), current=True)
        for each in Component.objects.all()
    }


def open_on(day: dt.date) -> int:
    """Modules at the bench at the end of a day."""
    over = Q(finished_on__lte=day)
    return BenchJob.objects.standing().filter(received_on__lte=day).exclude(over).count()


def first_possible(today: dt.date) -> dt.date:
    begun = BenchJob.objects.standing().aggregate(day=Min("finished_on"))["day"] or today
    return next_quarter(begun) + dt.timedelta(days=DAYS)


def latest_bench() -> dict[str, Any] | None:
    """The kept document; None where none was made yet."""
    row = KeptResult.objects.filter(kind=KIND, key=key_of({})).first()
    return None if row is None else {**json.loads(bytes(row.payload)), "counted_at": row.made_at}


def is_bench_due(today: dt.date | None = None) -> bool:
    """Whether a quarter has ended since the kept one, or none was ever made."""
    document = latest_bench()
    if document is None:
        return True
    newest = past_quarters(today or timezone.localdate(), 1)[0]
    return dt.date.fromisoformat(document["as_of"]) < newest + dt.timedelta(days=DAYS)
