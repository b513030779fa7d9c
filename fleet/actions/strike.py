"""One record struck out: it stays, with the reason, and leaves every count."""

from __future__ import annotations

from typing import Any

from django.utils import timezone

from fleet.actions.writes import save_again
from fleet.models import Person, Reading


def strike(record: Any, by: Person | None, reason: str) -> Any:
    record.struck_out, record.struck_out_at, record.struck_out_by = reason, timezone.now(), by
    if isinstance(record, Reading):
        record.save(update_fields=["struck_out", "struck_out_at", "struck_out_by"])
        return record
    return save_again(record, {"struck_out"})
