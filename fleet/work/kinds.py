"""Which function does which kind of work. Each app registers its own in a module `works.py`."""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING, Any

from django.utils.module_loading import autodiscover_modules

if TYPE_CHECKING:
    from fleet.models import Work
    from fleet.work.progress import Progress

# Must be repeatable: a worker may be killed at any line, and the work is then run again from the start.
Run = Callable[["Work", "Progress"], dict[str, Any]]
_kinds: dict[str, Run] = {}
_daily: dict[str, str] = {}


def work_kind(name: str, *, daily: str = "") -> Callable[[Run], Run]:
    """Registers `run(work, progress) -> result`, a dictionary that JSON can hold; `daily` titles what runs each day."""

    def register(run: Run) -> Run:
        _kinds[name] = run
        if daily:
            _daily[name] = daily
        return run

    return register


def find_kind(name: str) -> Run | None:
    if name not in _kinds:
        autodiscover_modules("works")
    return _kinds.get(name)


def daily_kinds() -> dict[str, str]:
    """Names and titles of the kinds that run once a day."""
    autodiscover_modules("works")
    return dict(_daily)
