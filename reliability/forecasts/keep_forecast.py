"""Keeps a forecast as it is told now, for good."""

from __future__ import annotations

import json
import uuid
from typing import Any

from fleet.actions.base import change, once
from fleet.actions.errors import BadValue
from fleet.models import DataVersion, Person, Site
from fleet.rights import LIFE, seen_by
from reliability.forecasts.question import Question
from reliability.models import KeptForecast
from reliability.version import program_version

LONGEST_NOTE = 500


def keep_forecast(
    *,
    by: Person,
    question: Question,
    document: dict[str, Any],
    note: str = "",
    entry_key: uuid.UUID | None = None,
) -> KeptForecast:
    """Inputs, as-of day, versions and the whole document; data that came in meanwhile do not change it."""
    if len(note) > LONGEST_NOTE:
        raise BadValue(f"The note has {len(note)} letters. Keep it to {LONGEST_NOTE}.", field="note")
    # The document may be older than the book is now: what it was counted from is what counts.
    told = {name: value for name, value in document.items() if name not in ("counted_at", "current", "data_version")}
    said = {"question": json.dumps(question.asked(), sort_keys=True), "note": note}
    with (
        change(by=by, right=LIFE, raises_version=False),
        once(entry_key, by=by, verb="keep forecast", said=said) as answer,
    ):
        if answer:
            return KeptForecast.objects.get(pk=answer["kept"])
        sites = list(seen_by(by, Site).filter(code__in=question.sites or ()))
        if len(sites) != len(question.sites or ()):
            raise BadValue("This forecast counts sites that are not yours. Choose among your own sites.", field="site")
        if question.sites is None and not by.all_sites:
            raise BadValue("This forecast counts every site, and you see only some. Choose your own.", field="site")
        kept = KeptForecast.objects.create(
            component=question.component,
            begin=question.begin,
            days=question.days,
            as_of=question.as_of,
            of_all_sites=question.sites is None,
            question=question.asked(),
            document=json.loads(json.dumps(told, allow_nan=False)),
            version=program_version(),
            data_version=document.get("data_version", DataVersion.current()),
            note=note.strip(),
            made_by=by,
        )
        kept.sites.add(*sites)
        answer["kept"] = kept.pk
    return kept
