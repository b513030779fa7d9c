"""The loop of a background worker."""

from __future__ import annotations

import datetime as dt
import signal
from types import FrameType

from django.utils import timezone
from django.utils.crypto import get_random_string
from django_tasks_db.management.commands.db_worker import Worker as TaskWorker

from fleet.models import KeptFile
from fleet.work.progress import STOPPING
from fleet.work.reaper import Reaper


class Worker(TaskWorker):
    """Takes tasks one by one; asked to stop, it ends the work in hand at its next step and puts it back."""

    def shutdown(self, signum: int, frame: FrameType | None) -> None:
        STOPPING.set()
        super().shutdown(signum, frame)


KEPT_DAYS = 90


def forget_old_files() -> None:
    """What was handed in or made long ago; the work itself and its result stay."""
    KeptFile.objects.filter(made_at__lt=timezone.now() - dt.timedelta(days=KEPT_DAYS)).delete()


def run_worker(*, interval: float = 0.5, batch: bool = False) -> None:
    """Until a signal, or with `batch` until nothing waits."""
    worker = Worker(
        queue_names=["default"],
        interval=interval,
        batch=batch,
        backend_name="default",
        startup_delay=False,
        max_tasks=None,
        worker_id=get_random_string(32),
        excluded_queue_names=[],
    )
    before = {number: signal.getsignal(number) for number in (signal.SIGINT, signal.SIGTERM)}
    worker.configure_signals()
    forget_old_files()
    try:
        with Reaper():
            worker.run()
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)
