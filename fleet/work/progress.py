"""What running work reports, and where it learns that it should stop."""

from __future__ import annotations

import threading
import time
import uuid
from typing import Any

from django.db import DatabaseError, connection

from fleet.models import Work, WorkState
from fleet.work.errors import Cancelled, PutBack, Superseded
from fleet.work.fence import write_fenced

BEAT_SECONDS = 5.0
WRITE_EVERY_SECONDS = 0.4
STOPPING = threading.Event()  # set when this process was asked to end


class Progress:
    """Handed to the function that does the work; call `step` often."""

    def __init__(self, work: Work, *, gives_way: bool = False) -> None:
        self.work_id: uuid.UUID = work.pk
        self.attempt: int = work.attempt
        self.gives_way = gives_way  # ends here, to be begun again, as soon as somebody waits for other work
        self._next_write = 0.0

    def step(self, done: int = 0, total: int = 0, message: str = "", *, may_stop: bool = True) -> None:
        """Reports, and raises Cancelled or PutBack where the work should end here."""
        if may_stop and STOPPING.is_set():
            raise PutBack
        now = time.monotonic()
        if now < self._next_write and done < total:
            return
        self._next_write = now + WRITE_EVERY_SECONDS
        write_fenced(self.work_id, self.attempt, done=done, total=total, message=message[:300])
        if may_stop and Work.objects.filter(pk=self.work_id, cancel_asked=True).exists():
            raise Cancelled
        if may_stop and self.gives_way and somebody_waits():
            raise PutBack

    def keep(self, result: dict[str, Any]) -> None:
        """Keeps a result; inside the transaction that stores the records, both hold or neither does."""
        write_fenced(self.work_id, self.attempt, result=result)


def somebody_waits() -> bool:
    """For work that is in line; what lost its task waits for the reaper, not for us."""
    waiting = Work.objects.filter(state=WorkState.WAITING, person__isnull=False)
    return waiting.exclude(task_id="").exists()


class SilentProgress(Progress):
    """For work that no row stands for, such as a preview on the command line."""

    def __init__(self) -> None:
        self.work_id, self.attempt = uuid.uuid4(), 0

    def step(self, done: int = 0, total: int = 0, message: str = "", *, may_stop: bool = True) -> None:
        return

    def keep(self, result: dict[str, Any]) -> None:
        return


class Heartbeat:
    """Says every few seconds, from a thread of its own, that the worker is alive."""

    def __init__(self, progress: Progress, seconds: float = BEAT_SECONDS) -> None:
        self.progress, self.seconds = progress, seconds
        self._ended = threading.Event()
        self._thread = threading.Thread(target=self._beat, name="heartbeat", daemon=True)

    def __enter__(self) -> Heartbeat:
        self._thread.start()
        return self

    def __exit__(self, *exc: object) -> None:
        self._ended.set()
        self._thread.join(timeout=self.seconds)

    def _beat(self) -> None:
        try:
            while not self._ended.wait(self.seconds):
                try:
                    write_fenced(self.progress.work_id, self.progress.attempt)
                except DatabaseError:
                    # A lock held too long, or a lost server: the work itself meets the same and decides.
                    connection.close()
        except Superseded:
            return
        finally:
            connection.close()
