"""Forecasts are counted once for each question and day, and again when somebody asks: entries of the same day move
them little, and counting takes seconds on a large fleet. A forecast says which entries came after it.
"""

from __future__ import annotations

import datetime as dt
import json
from typing import Any

from django.utils import timezone

from fleet.models import DataVersion
from reliability.forecasts.difference import difference_document
from reliability.forecasts.next_quarter import forecast_document
from reliability.forecasts.question import Question
from reliability.kept import kept, key_of
from reliability.models import KeptResult

KIND = "forecast"
KEPT_FOR = dt.timedelta(days=3)


def kept_forecast(question: Question, *, again: bool = False) -> dict[str, Any]:
    """The document with `counted_at`, its `data_version`, and `current`: False where entries came after it."""
    version, key = DataVersion.current(), key_of(question.asked())
    row = KeptResult.objects.filter(kind=KIND, key=key).first()
    if row is None or (again and row.data_version != version):
        row = _count(question, key, version)
    document = json.loads(bytes(row.payload))
    return {
        **document,
        "counted_at": row.made_at,
        "data_version": row.data_version,
        "current": row.data_version == version,
    }


def kept_difference(question: Question) -> dict[str, Any]:
    """What the assumptions change, kept for the same day and data as the forecast."""
    found: dict[str, Any] = kept("forecast difference", question.asked(), lambda: difference_document(question))
    return found


def _count(question: Question, key: str, version: int) -> KeptResult:
    document = forecast_document(question)
    text = json.dumps(document, allow_nan=False, separators=(",", ":"))
    KeptResult.objects.filter(kind=KIND, made_at__lt=timezone.now() - KEPT_FOR).delete()
    row, _ = KeptResult.objects.update_or_create(
        kind=KIND,
        key=key,
        defaults={"data_version": version, "payload": text.encode(), "made_at": timezone.now()},
    )
    return row
