"""How a piece of work may end before it is done."""

from __future__ import annotations

from typing import Any


class Cancelled(Exception):
    """Somebody asked to stop it."""


class PutBack(Exception):
    """This worker is being stopped; the work waits for another."""


class Superseded(Exception):
    """Another attempt has taken the work over: this one may write nothing more."""


class WorkFailed(Exception):
    """It cannot be done, for a reason that people can understand; `result` is kept beside the reason."""

    def __init__(self, message: str, result: dict[str, Any] | None = None) -> None:
        super().__init__(message)
        self.message, self.result = message, result or {}
