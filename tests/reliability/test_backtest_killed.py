"""A worker killed in the middle of a backtest: the next one goes on with the quarter that was not judged yet."""

from __future__ import annotations

import datetime as dt
import signal

import pytest
from django.utils import timezone

from fleet.work import enqueue
from fleet.work.reaper import reap
from reliability.forecasts.backtest import KIND_QUARTER, latest
from reliability.models import KeptResult
from tests.fleet.work.worker_process import run_worker_until_idle, start_worker, wait_until
from tests.reliability.test_forecast import lived_fleet

pytestmark = pytest.mark.django_db(transaction=True)
QUARTERS = 14  # back to 2024, where the records are, from any day of the next years


def test_what_was_judged_before_the_kill_is_not_judged_again() -> None:
    fleet = lived_fleet(12)
    years = max(0, timezone.localdate().year - 2026)
    quarters = QUARTERS + 4 * years
    work = enqueue("backtest", "Judging past forecasts", {"component": "NUT", "quarters": quarters}, None)
    worker = start_worker()
    wait_until(lambda: KeptResult.objects.filter(kind=KIND_QUARTER).count() >= 5, "some quarters are judged")
    worker.send_signal(signal.SIGKILL)
    worker.wait()
    work.refresh_from_db()
    if work.state == "done":
        pytest.skip("the worker was quicker than the kill")
    assert latest(fleet.component) is None
    before = dict(KeptResult.objects.filter(kind=KIND_QUARTER).values_list("key", "made_at"))

    reap(timezone.now() + dt.timedelta(minutes=2))
    run_worker_until_idle()

    work.refresh_from_db()
    assert (work.state, work.attempt) == ("done", 2)
    after = dict(KeptResult.objects.filter(kind=KIND_QUARTER).values_list("key", "made_at"))
    assert {key: after[key] for key in before} == before
    assert len(after) == quarters
    document = latest(fleet.component)
    assert document is not None
    assert document["judged"] >= 4
