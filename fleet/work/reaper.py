"""Finds work whose worker died, and puts it in line again. One runs in every worker; any number may look at once."""

from __future__ import annotations

import datetime as dt
import logging
import threading
from typing import Any

from django.db import DatabaseError, connection, transaction
from django.utils import timezone
from django_tasks import TaskResultStatus, task_backends
from django_tasks.exceptions import TaskResultDoesNotExist

from fleet.models import Work, WorkState
from fleet.work.daily import enqueue_due
from fleet.work.enqueue import send
from fleet.work.fence import change_state

logger = logging.getLogger(__name__)
SILENT = dt.timedelta(seconds=30)  # six missed heartbeats
CLAIM = dt.timedelta(seconds=30)  # from a task's start to its claim of the work: milliseconds, or a long lock
SEND = dt.timedelta(seconds=10)  # from the work's commit to its task
LOOK_EVERY_SECONDS = 10.0
MOST_ATTEMPTS = 6
GIVEN_UP = "It was begun {attempts} times, and each time its worker died. Split the file, or look in the server's log."


def reap(now: dt.datetime | None = None) -> int:
    """One round; returns how many pieces of work were put in line again."""
    now = now or timezone.now()
    again = sum(put_silent_work_back(work, now) for work in silent_work(now))
    again += sum(send_lost_work(work, now) for work in Work.objects.filter(state=WorkState.WAITING))
    fail_dead_tasks(now)
    return again


def silent_work(now: dt.datetime) -> Any:
    return Work.objects.filter(state=WorkState.RUNNING, heartbeat_at__lt=now - SILENT)


def put_silent_work_back(work: Work, now: dt.datetime) -> bool:
    """The attempt number rises at the next claim: whatever the old worker still writes is refused."""
    same = Work.objects.filter(
        pk=work.pk, state=WorkState.RUNNING, attempt=work.attempt, heartbeat_at=work.heartbeat_at
    )
    if work.attempt >= MOST_ATTEMPTS:
        change_state(same, state=WorkState.FAILED, finished_at=now, message=GIVEN_UP.format(attempts=work.attempt))
        return False
    if not change_state(same, state=WorkState.WAITING, task_id="", message="Its worker died. It waits for another."):
        return False
    logger.warning("work %s (%s) was silent since %s and waits again", work.pk, work.kind, work.heartbeat_at)
    send(work.pk)
    return True


def send_lost_work(work: Work, now: dt.datetime) -> bool:
    """Waiting work without a live task: killed before the task was sent, or between its start and the claim."""
    if work.made_at > now - SEND or task_is_live(work.task_id, now):
        return False
    with transaction.atomic():
        same = Work.objects.filter(pk=work.pk, state=WorkState.WAITING, task_id=work.task_id)
        if not change_state(same, task_id="sent again"):
            return False
        send(work.pk)
    return True


def task_is_live(task_id: str, now: dt.datetime) -> bool:
    try:
        result = task_backends["default"].get_result(task_id)
    except (TaskResultDoesNotExist, ValueError):
        return False
    except NotImplementedError:
        return bool(task_id)
    if result.status == TaskResultStatus.RUNNING:
        return result.started_at is None or result.started_at > now - CLAIM
    return result.status == TaskResultStatus.READY


def fail_dead_tasks(now: dt.datetime) -> None:
    """Tasks that a killed worker left running for ever, and whose work is elsewhere or at an end."""
    from django_tasks_db.models import DBTaskResult

    from fleet.work.run import run_work

    started = DBTaskResult.objects.filter(
        status=TaskResultStatus.RUNNING, task_path=run_work.module_path, started_at__lt=now - CLAIM
    )
    for dead in started:
        work = Work.objects.filter(pk=dead.args_kwargs["args"][0]).first()
        if work is None or work.state != WorkState.RUNNING or work.task_id != str(dead.pk):
            change_state(
                DBTaskResult.objects.filter(pk=dead.pk, status=TaskResultStatus.RUNNING),
                status=TaskResultStatus.FAILED,
                finished_at=now,
                exception_class_path="builtins.SystemExit",
                traceback="The worker died.",
            )


class Reaper:
    """Looks round now and then, from a thread of its own, as long as the worker runs."""

    def __init__(self, seconds: float = LOOK_EVERY_SECONDS) -> None:
        self.seconds = seconds
        self._ended = threading.Event()
        self._thread = threading.Thread(target=self._look, name="reaper", daemon=True)

    def __enter__(self) -> Reaper:
        self._thread.start()
        return self

    def __exit__(self, *exc: object) -> None:
        self._ended.set()
        self._thread.join(timeout=2)

    def _look(self) -> None:
        try:
            while True:
                try:
                    reap()
                    enqueue_due()
                except DatabaseError as error:
                    logger.warning("the reaper could not look round: %s", error)
                    connection.close()
                if self._ended.wait(self.seconds):
                    return
        finally:
            connection.close()
