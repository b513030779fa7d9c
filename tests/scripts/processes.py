"""Helpers to watch real processes without guessing how long they take."""

from __future__ import annotations

import os
import threading
import time
from collections.abc import Callable
from pathlib import Path

PATIENCE = 20.0


def wait_until(happened: Callable[[], bool], what: str) -> None:
    """Ask again and again, for a while; fail with what was waited for."""
    give_up_at = time.monotonic() + PATIENCE
    pause = threading.Event()
    while not happened():
        assert time.monotonic() < give_up_at, f"waited {PATIENCE:.0f} s in vain until {what}"
        pause.wait(0.02)


def alive(pid: int) -> bool:
    """Whether the process still runs; one that ended and was not yet collected does not."""
    try:
        os.kill(pid, 0)
    except ProcessLookupError:
        return False
    try:
        state = Path(f"/proc/{pid}/stat").read_text().rpartition(")")[2].split()[0]
    except FileNotFoundError:
        return False
    return state != "Z"


def lines(path: Path) -> list[str]:
    return path.read_text().split() if path.exists() else []
