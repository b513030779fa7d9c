"""Background work in one process: states, fences, the reaper."""

from __future__ import annotations

import datetime as dt
from typing import Any

import pytest
from django.utils import timezone
from django_tasks import TaskResultStatus
from django_tasks_db.models import DBTaskResult

from fleet.history import current_writer
from fleet.models import KeptFile, Work
from fleet.work import Cancelled, GivenFile, Progress, PutBack, Superseded, WorkFailed, enqueue, run_here, work_kind
from fleet.work.enqueue import ask_to_cancel, send
from fleet.work.progress import STOPPING, Heartbeat
from fleet.work.reaper import MOST_ATTEMPTS, reap
from fleet.work.run import claim, run_work
from fleet.work.worker import KEPT_DAYS, forget_old_files
from tests import factories as make
from tests.fleet.work.worker_process import wait_until

pytestmark = pytest.mark.django_db
LATER = dt.timedelta(minutes=2)
seen: list[Any] = []


@work_kind("quick for a test")
def quick(work: Work, progress: Progress) -> dict[str, Any]:
    progress.step(1, 2, "half of it")
    seen.append(current_writer().person)
    if work.arguments.get("fail"):
        raise WorkFailed("The file is missing. Choose it again.", {"errors": 1})
    if work.arguments.get("fault"):
        raise ZeroDivisionError
    return {"sum": 3}


def new_work(**arguments: Any) -> Work:
    return Work.objects.create(kind="quick for a test", title="quick", arguments=arguments)


def test_done_with_a_result_and_the_person_as_writer() -> None:
    work = new_work()
    work.person = make.make_manager()
    work.save()

    run_here(work)

    assert (work.state, work.result, work.attempt, work.done, work.total) == ("done", {"sum": 3}, 1, 1, 2)
    assert seen[-1] == work.person
    assert work.finished_at is not None


def test_failed_in_words_and_by_a_fault(caplog: pytest.LogCaptureFixture) -> None:
    told, fault = run_here(new_work(fail=True)), run_here(new_work(fault=True))

    assert (told.state, told.message, told.result) == ("failed", "The file is missing. Choose it again.", {"errors": 1})
    assert fault.state == "failed"
    assert "ZeroDivisionError" in fault.message
    assert "ended by a fault" in caplog.text


def test_a_kind_that_nobody_knows() -> None:
    assert "knows no work" in run_here(Work.objects.create(kind="magic")).message


def test_it_is_done_once() -> None:
    work = new_work()
    run_here(work)

    assert claim(work.pk) is None
    assert run_here(work).attempt == 1


def test_files_are_kept_and_the_task_is_sent_after_the_commit(django_capture_on_commit_callbacks: Any) -> None:
    with django_capture_on_commit_callbacks(execute=True):
        work = enqueue("quick for a test", "t" * 300, {"a": 1}, None, [GivenFile("a.csv", b"x")])

    work.refresh_from_db()
    task = DBTaskResult.objects.get()
    assert work.task_id == str(task.pk)
    assert task.args_kwargs["args"] == [str(work.pk)]
    assert bytes(KeptFile.objects.get(work=work).content) == b"x"
    assert len(work.title) == 200


def test_cancelled_before_and_during() -> None:
    waiting, running = new_work(), new_work()
    ask_to_cancel(waiting)
    claimed = claim(running.pk)
    ask_to_cancel(running)

    waiting.refresh_from_db()
    assert waiting.state == "cancelled"
    assert run_here(waiting).state == "cancelled"
    assert claimed is not None
    with pytest.raises(Cancelled):
        Progress(claimed).step(1, 2)


def test_a_stopping_worker_puts_it_back(monkeypatch: pytest.MonkeyPatch) -> None:
    work = new_work()
    STOPPING.set()
    try:
        run_here(work)
    finally:
        STOPPING.clear()

    assert work.state == "waiting"
    assert run_here(work).state == "done"
    claimed = claim(new_work().pk)
    assert claimed is not None
    monkeypatch.setattr("fleet.work.progress.STOPPING.is_set", lambda: True)
    with pytest.raises(PutBack):
        Progress(claimed).step()


def test_work_that_nobody_asked_for_gives_way_to_a_persons() -> None:
    for_nobody, for_a_person = new_work(), new_work()
    run_work.func(str(for_nobody.pk))
    for_nobody.refresh_from_db()
    assert for_nobody.state == "done"  # nobody waits

    for_nobody = new_work()
    for_a_person.person = make.make_manager()
    for_a_person.save()
    send(for_a_person.pk)
    run_work.func(str(for_nobody.pk))
    for_nobody.refresh_from_db()
    assert for_nobody.state == "waiting"
    send(for_nobody.pk)
    in_line = [task.args_kwargs["args"][0] for task in DBTaskResult.objects.ready()]
    assert in_line[0] == str(for_a_person.pk)

    assert run_here(for_a_person).state == "done"
    run_work.func(str(for_nobody.pk))
    for_nobody.refresh_from_db()
    assert (for_nobody.state, for_nobody.attempt) == ("done", 2)


def test_an_attempt_that_was_taken_over_writes_nothing() -> None:
    first = claim(new_work().pk)
    assert first is not None
    old = Progress(first)
    reap(timezone.now() + LATER)
    second = claim(first.pk)
    assert second is not None
    assert second.attempt == 2

    for write in (lambda: old.step(1, 2), lambda: old.keep({"mine": True})):
        with pytest.raises(Superseded):
            write()
    assert Work.objects.get(pk=first.pk).result == {}


def test_the_reaper_sends_work_that_lost_its_task() -> None:
    """Killed between the commit of the work and the sending of its task."""
    work = new_work()

    assert reap() == 0  # it may be on its way
    assert reap(timezone.now() + LATER) == 1
    work.refresh_from_db()
    assert DBTaskResult.objects.get().pk.hex == work.task_id.replace("-", "")
    assert reap(timezone.now() + LATER) == 0


def test_the_reaper_sends_work_whose_task_was_claimed_by_a_dead_worker() -> None:
    """Killed between the claim of the task and that of the work."""
    work = new_work()
    reap(timezone.now() + LATER)
    dead = DBTaskResult.objects.get()
    dead.claim("dead")

    assert reap(timezone.now()) == 0
    assert reap(timezone.now() + LATER) == 1
    dead.refresh_from_db()
    assert dead.status == TaskResultStatus.FAILED
    assert DBTaskResult.objects.exclude(pk=dead.pk).get().status == TaskResultStatus.READY
    assert run_here(work).state == "done"


def test_the_reaper_gives_up_after_some_attempts() -> None:
    work = new_work()
    claim(work.pk)
    Work.objects.filter(pk=work.pk).update(attempt=MOST_ATTEMPTS)

    reap(timezone.now() + LATER)

    work.refresh_from_db()
    assert work.state == "failed"
    assert f"begun {MOST_ATTEMPTS} times" in work.message


@pytest.mark.django_db(transaction=True)
def test_the_heart_beats_beside_the_work() -> None:
    work = claim(new_work().pk)
    assert work is not None
    Work.objects.filter(pk=work.pk).update(heartbeat_at=timezone.now() - LATER)
    with Heartbeat(Progress(work), seconds=0.05):
        wait_until(lambda: Work.objects.get(pk=work.pk).heartbeat_at > timezone.now() - LATER / 2, "it beats")
    assert reap() == 0


def test_files_of_long_ago_are_forgotten_but_not_the_work() -> None:
    work = new_work()
    old, young = (KeptFile.objects.create(work=work, name=name, content=b"x") for name in ("old", "young"))
    KeptFile.objects.filter(pk=old.pk).update(made_at=timezone.now() - dt.timedelta(days=KEPT_DAYS + 1))

    forget_old_files()

    assert list(KeptFile.objects.all()) == [young]
    assert Work.objects.filter(pk=work.pk).exists()
