"""Puts work in line for the background."""

from __future__ import annotations

import uuid
from collections.abc import Sequence
from dataclasses import dataclass
from functools import partial
from typing import Any

from django.db import transaction

from fleet.models import KeptFile, Person, Work, WorkState
from fleet.work.fence import change_state

SOMEBODY_WAITS = 50  # before work that only keeps results fresh


@dataclass(frozen=True)
class GivenFile:
    """A file that the work reads."""

    name: str
    content: bytes
    content_type: str = "application/octet-stream"


def enqueue(
    kind: str, title: str, arguments: dict[str, Any], person: Person | None, files: Sequence[GivenFile] = ()
) -> Work:
    """Keeps the work and its files; the task is sent when the transaction holds, or by the reaper if that fails."""
    with transaction.atomic():
        work = Work.objects.create(kind=kind, title=title[:200], arguments=arguments, person=person)
        for file in files:
            KeptFile.objects.create(
                work=work, role="input", name=file.name[:200], content_type=file.content_type, content=file.content
            )
        transaction.on_commit(partial(send, work.pk))
    return work


def send(work_id: uuid.UUID) -> None:
    """One task for the work; a second one does no harm, since only one can claim it."""
    from fleet.work.run import run_work

    asked_for = Work.objects.filter(pk=work_id, person__isnull=False).exists()
    task = run_work.using(priority=SOMEBODY_WAITS if asked_for else 0).enqueue(str(work_id))
    change_state(Work.objects.filter(pk=work_id, state=WorkState.WAITING), task_id=str(task.id))


def ask_to_cancel(work: Work) -> None:
    """Waiting work ends at once, running work at its next step."""
    waiting = Work.objects.filter(pk=work.pk, state=WorkState.WAITING)
    if not change_state(waiting, state=WorkState.CANCELLED, cancel_asked=True, message="Stopped before it began."):
        # Put back in line meanwhile, it ends at the first step of its next attempt.
        going_on = [WorkState.RUNNING, WorkState.WAITING]
        change_state(Work.objects.filter(pk=work.pk, state__in=going_on), cancel_asked=True)
