"""Background work on lives."""

from __future__ import annotations

from typing import Any

from django.utils import timezone

from fleet.work import Progress, work_kind
from reliability.lifetimes_from_fleet import component_codes

# What the Life screen asks when nothing is chosen: each component by part, as the records stand today.
FIRST_QUESTION: dict[str, Any] = {"by": "part", "confidence": 0.95, "with_rigs": False, "worn_is_failure": True}


@work_kind("fit_lives", daily="Fitting lives")
def fit_lives(work: Any, progress: Progress) -> dict[str, Any]:
    """The answer that the Life screen opens on, for every component, so that the first page of a day waits for none."""
    from reliability.life_answer import kept_life_document

    codes = component_codes()
    for place, code in enumerate(codes):
        progress.step(place, len(codes), code)
        kept_life_document(code, as_of=timezone.localdate(), **FIRST_QUESTION)
    return {"components": len(codes)}
