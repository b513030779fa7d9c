"""A real worker in its own process, killed in the middle: nothing of its work is lost, nothing is done twice."""

from __future__ import annotations

import datetime as dt
import signal
from pathlib import Path

import pytest
from django.utils import timezone
from django_tasks import TaskResultStatus
from django_tasks_db.models import DBTaskResult

from fleet.models import ClockPoint, Fitting, Module, Visit, Work
from fleet.transfer.writing_sql import NOT_FINISHED
from fleet.work import GivenFile, enqueue
from fleet.work.enqueue import ask_to_cancel
from fleet.work.reaper import reap
from tests.fleet.invariants import broken_rules
from tests.fleet.transfer.files import fleet, zipped
from tests.fleet.work.worker_process import SLOW, run_worker_until_idle, start_worker, wait_until

pytestmark = pytest.mark.django_db(transaction=True)
LATER = dt.timedelta(minutes=2)


def state(work: Work) -> str:
    work.refresh_from_db()
    return work.state


def slow_work(steps: int) -> Work:
    return enqueue(SLOW, "slow", {"steps": steps}, None)


def test_killed_outright_it_is_done_by_the_next_worker() -> None:
    work = slow_work(3000)
    worker = start_worker()
    wait_until(lambda: state(work) == "running" and work.done > 0, "the work runs")
    worker.send_signal(signal.SIGKILL)
    worker.wait()
    first_task = DBTaskResult.objects.get()
    assert (state(work), first_task.status) == ("running", TaskResultStatus.RUNNING)
    assert reap() == 0  # its heartbeat is fresh yet

    assert reap(timezone.now() + LATER) == 1
    assert state(work) == "waiting"
    first_task.refresh_from_db()
    assert first_task.status == TaskResultStatus.FAILED
    Work.objects.filter(pk=work.pk).update(arguments={"steps": 5})
    run_worker_until_idle()

    assert (state(work), work.attempt, work.result) == ("done", 2, {"steps": 5})


def test_told_to_stop_it_puts_the_work_back_at_once() -> None:
    work = slow_work(3000)
    worker = start_worker()
    wait_until(lambda: state(work) == "running" and work.done > 0, "the work runs")
    worker.send_signal(signal.SIGTERM)
    assert worker.wait(timeout=60) == 0

    assert state(work) == "waiting"
    Work.objects.filter(pk=work.pk).update(arguments={"steps": 5})
    run_worker_until_idle()
    assert (state(work), work.attempt) == ("done", 2)


def test_a_running_work_can_be_cancelled() -> None:
    work = slow_work(3000)
    worker = start_worker("--batch")
    try:
        wait_until(lambda: state(work) == "running" and work.done > 0, "the work runs")
        ask_to_cancel(work)
        wait_until(lambda: state(work) == "cancelled", "the work is cancelled")
        assert worker.wait(timeout=60) == 0
    finally:
        worker.kill()
        worker.wait()


def long_history(fittings: int) -> bytes:
    """One more module whose nut was changed every day."""
    first = dt.date(2010, 1, 1)
    rows = ["fitting,module,position,part,fitted_on,removed_on,reason"]
    for number in range(fittings):
        fitted = first + dt.timedelta(days=number)
        rows.append(f"D-{number},K-10,N1,N-1,{fitted},{fitted + dt.timedelta(days=1)},planned")
    stays = "module,site,from_on\nK-10,WEIR,2009-01-01\n"
    body = "\n".join(rows) + "\n"
    return zipped(fleet(fittings=body, placements=stays, visits=None, findings=None, stops=None, readings=None))


def test_an_import_killed_while_it_stores_is_whole_in_the_end(tmp_path: Path) -> None:
    """On SQLite the kill falls between its short transactions, on PostgreSQL into its long one."""
    fittings = 5000
    file = GivenFile("fleet.zip", long_history(fittings))
    work = enqueue("import_records", "Import of fleet.zip", {}, None, [file])
    worker = start_worker()
    wait_until(lambda: state(work) == "running" and work.message.startswith("Storing"), "it stores")
    worker.send_signal(signal.SIGKILL)
    worker.wait()
    assert state(work) == "running"
    assert not Module.objects.exists()
    assert not Fitting.objects.standing().exists()

    reap(timezone.now() + LATER)
    run_worker_until_idle()

    assert (state(work), work.attempt) == ("done", 2), work.result
    assert Fitting.objects.standing().count() == Fitting.objects.count() == Fitting.history.count() == fittings
    assert Visit.objects.count() == Visit.history.count() == fittings + 1
    assert not Fitting.objects.filter(struck_out=NOT_FINISHED).exists()
    assert ClockPoint.objects.exists()
    assert broken_rules() == []


def test_an_import_killed_before_its_clocks_gets_them_from_the_next_worker() -> None:
    work = enqueue("import_records", "Import of fleet.zip", {}, None, [GivenFile("fleet.zip", long_history(3000))])
    worker = start_worker()
    wait_until(lambda: state(work) and work.result.get("stored"), "the records are stored")
    worker.send_signal(signal.SIGKILL)
    worker.wait()
    touched = Module.objects.get(code="K-10")
    ClockPoint.objects.filter(module=touched).delete()
    before = Fitting.history.count()
    if state(work) == "done":
        pytest.skip("the worker was quicker than the kill")

    reap(timezone.now() + LATER)
    run_worker_until_idle()

    assert (state(work), work.attempt) == ("done", 2)
    assert Fitting.history.count() == before == 3000
    assert ClockPoint.objects.filter(module=touched).exists()
