"""Runs one piece of work, in a worker or in the process of a command."""

from __future__ import annotations

import logging
import uuid
from typing import Any

from django.db import InterfaceError, OperationalError, transaction
from django.db.models import F
from django.utils import timezone
from django_tasks import task

from fleet.history import writing
from fleet.models import Work, WorkState
from fleet.work.enqueue import send
from fleet.work.errors import Cancelled, PutBack, Superseded, WorkFailed
from fleet.work.fence import change_state, held
from fleet.work.kinds import find_kind
from fleet.work.progress import Heartbeat, Progress

logger = logging.getLogger(__name__)
FAULT = "It ended by a fault of the program ({name}). Nothing more was stored; the server's log says more."


@task()
def run_work(work_id: str) -> str:
    """The task of the queue: does the work unless somebody else has it or it ended."""
    work = claim(uuid.UUID(work_id))
    # What nobody asked for gives way: one worker must not keep a person waiting for minutes.
    return run_claimed(work, gives_way=work.person_id is None) if work else "not waiting"


def run_here(work: Work) -> Work:
    """Runs waiting work in this process, at once."""
    claimed = claim(work.pk)
    if claimed:
        run_claimed(claimed)
    work.refresh_from_db()
    return work


def claim(work_id: uuid.UUID) -> Work | None:
    now = timezone.now()
    waiting = Work.objects.filter(pk=work_id, state=WorkState.WAITING)
    with transaction.atomic():
        taken = change_state(
            waiting, state=WorkState.RUNNING, attempt=F("attempt") + 1, started_at=now, heartbeat_at=now, message=""
        )
        return Work.objects.get(pk=work_id) if taken else None


def run_claimed(work: Work, *, gives_way: bool = False) -> str:
    progress = Progress(work, gives_way=gives_way)
    try:
        run = find_kind(work.kind)
        if run is None:
            raise WorkFailed(f"This version knows no work called “{work.kind}”. Start it again from its screen.")
        with Heartbeat(progress), writing(person=work.person):
            result = run(work, progress)
        end(work, WorkState.DONE, message=str(result.pop("message", "")), result=result)
    except Cancelled:
        end(work, WorkState.CANCELLED, message="Stopped as asked. Nothing was stored.")
    except PutBack:
        put_back(work)
    except Superseded:
        logger.warning("attempt %s of work %s was taken over by another", work.attempt, work.pk)
    except WorkFailed as failure:
        end(work, WorkState.FAILED, message=failure.message, result=failure.result)
    except (OperationalError, InterfaceError):
        # The database was lost or locked too long. The heartbeat grows old and the reaper puts the work back.
        raise
    except Exception as fault:
        logger.exception("work %s (%s) ended by a fault", work.pk, work.kind)
        end(work, WorkState.FAILED, message=FAULT.format(name=type(fault).__name__))
    return work.state


def end(work: Work, state: str, *, message: str | None = None, result: dict[str, Any] | None = None) -> None:
    columns: dict[str, Any] = {"state": state, "finished_at": timezone.now()}
    if message is not None:
        columns["message"] = message[:300]
    if result is not None:
        columns["result"] = result
    if not change_state(held(work.pk, work.attempt), **columns):
        logger.warning("attempt %s of work %s came too late with its end", work.attempt, work.pk)
        return
    work.state = state


def put_back(work: Work) -> None:
    """For the next worker, at once."""
    if change_state(held(work.pk, work.attempt), state=WorkState.WAITING, task_id="", message="Waits for its turn."):
        send(work.pk)
