"""Several writers at one moment, each on a connection of its own."""

from __future__ import annotations

import threading
from collections.abc import Callable
from typing import Any

import pytest
from django.db import connection

PATIENCE = 0.4  # seconds that one writer waits for the other to reach the same line


class Meeting:
    """Where two writers would both be if nothing kept them apart; with a lock the wait ends alone."""

    def __init__(self, writers: int = 2) -> None:
        self.barrier = threading.Barrier(writers)
        self.met = False

    def wait(self) -> None:
        try:
            self.barrier.wait(timeout=PATIENCE)
            self.met = True
        except threading.BrokenBarrierError:
            pass

    def after(self, monkeypatch: pytest.MonkeyPatch, owner: Any, name: str) -> Meeting:
        """Every writer that has been through this function waits here for the other."""
        original = getattr(owner, name)

        def then_wait(*args: Any, **kwargs: Any) -> Any:
            answer = original(*args, **kwargs)
            self.wait()
            return answer

        monkeypatch.setattr(owner, name, then_wait)
        return self


def at_once(*calls: Callable[[], Any]) -> list[Any]:
    """Starts all calls at one moment; their answers, or what they raised, in the order given."""
    answers: list[Any] = [None] * len(calls)
    start = threading.Barrier(len(calls))

    def run(place: int, call: Callable[[], Any]) -> None:
        try:
            start.wait(timeout=30)
            answers[place] = call()
        except Exception as raised:  # the test looks at what was raised
            answers[place] = raised
        finally:
            connection.close()

    threads = [threading.Thread(target=run, args=(place, call), daemon=True) for place, call in enumerate(calls)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join(timeout=120)
    assert not any(thread.is_alive() for thread in threads), "a writer hangs"
    return answers


def raised(answers: list[Any], kind: type[Exception]) -> list[Any]:
    return [answer for answer in answers if isinstance(answer, kind)]


def recorded(answers: list[Any]) -> list[Any]:
    return [answer for answer in answers if not isinstance(answer, Exception)]
