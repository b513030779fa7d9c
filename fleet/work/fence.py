"""The only writes to a running piece of work: each holds only while its attempt is the latest."""

from __future__ import annotations

import uuid
from typing import Any

from django.utils import timezone

from fleet.models import Work, WorkState
from fleet.work.errors import Superseded


def change_state(rows: Any, **columns: Any) -> bool:
    """Writes to the rows of a query that names what it expects; False where nothing was as expected."""
    return bool(rows.update(**columns))  # no history: work is not a record


def held(work_id: uuid.UUID, attempt: int) -> Any:
    return Work.objects.filter(pk=work_id, attempt=attempt, state=WorkState.RUNNING)


def write_fenced(work_id: uuid.UUID, attempt: int, **columns: Any) -> None:
    """Writes columns and a heartbeat; inside a transaction the row stays locked until the commit."""
    if not change_state(held(work_id, attempt), heartbeat_at=timezone.now(), **columns):
        raise Superseded
