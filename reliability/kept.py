"""Answers kept so that a page reads them instead of fitting again."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Callable
from typing import Any

from django.db import DatabaseError, transaction

from fleet.models import DataVersion
from reliability.models import KeptResult

# Raised with every change of a method, so that no answer of the old one is read again.
METHODS_VERSION = 29


def kept(kind: str, question: dict[str, Any], compute: Callable[[], Any]) -> Any:
    """The answer to a question, computed at most once for each version of the data.

    Question and answer consist of what JSON can hold; days in the question are written as text.
    """
    version = DataVersion.current()
    key = key_of(question)
    payload = KeptResult.objects.filter(kind=kind, key=key, data_version=version).values_list("payload", flat=True)
    for found in payload:
        return json.loads(bytes(found))
    # What changes while this is computed raises the version, so the answer is not read again.
    answer = compute()
    text = json.dumps(answer, allow_nan=False, separators=(",", ":"))
    _keep(kind, key, version, text.encode())
    return json.loads(text)


def key_of(question: dict[str, Any]) -> str:
    text = json.dumps([METHODS_VERSION, question], sort_keys=True, default=str)
    return hashlib.sha256(text.encode()).hexdigest()


def _keep(kind: str, key: str, version: int, payload: bytes) -> None:
    """Two who computed the same at one moment both write; the answer is the same. A full or locked book keeps none."""
    row = KeptResult(kind=kind, key=key, data_version=version, payload=payload)
    try:
        with transaction.atomic():
            KeptResult.objects.filter(kind=kind, data_version__lt=version).delete()
            KeptResult.objects.bulk_create(
                [row],
                update_conflicts=True,
                unique_fields=["kind", "key"],
                update_fields=["data_version", "payload"],
            )
    except DatabaseError:
        return
