"""A worker in a process of its own, on the test's database: `python -m tests.fleet.work.worker_process DATABASE`."""

from __future__ import annotations

import os
import subprocess
import sys
import threading
from collections.abc import Callable
from pathlib import Path
from typing import Any

ROOT = Path(__file__).resolve().parents[3]
SLOW = "slow for a test"
STEPS = 400
PATIENCE = 90.0  # seconds; far more than needed, for a machine that does much else


def start_worker(*arguments: str) -> subprocess.Popen[bytes]:
    from django.db import connection

    name = str(connection.settings_dict["NAME"])
    command = [sys.executable, "-m", "tests.fleet.work.worker_process", name, *arguments]
    return subprocess.Popen(command, cwd=ROOT, env=dict(os.environ, DJANGO_SETTINGS_MODULE="config.settings"))


def run_worker_until_idle() -> None:
    worker = start_worker("--batch")
    try:
        assert worker.wait(timeout=PATIENCE) == 0
    finally:
        worker.kill()
        worker.wait()


def wait_until(true: Callable[[], Any], what: str) -> None:
    waiting = threading.Event()
    for _ in range(int(PATIENCE / 0.02)):
        if true():
            return
        waiting.wait(0.02)
    raise AssertionError(f"waited in vain until {what}")


def main() -> None:
    import django
    from django.conf import settings

    settings.DATABASES["default"]["NAME"] = sys.argv[1]
    django.setup()
    from django.core.management import call_command

    from fleet.work import work_kind

    @work_kind(SLOW)
    def slow(work: Any, progress: Any) -> dict[str, Any]:
        pause = threading.Event()
        steps = work.arguments.get("steps", STEPS)
        for done in range(steps):
            progress.step(done, steps, "going")
            pause.wait(0.02)
        return {"steps": steps}

    call_command("work", *sys.argv[2:], interval=0.1)


if __name__ == "__main__":
    main()
