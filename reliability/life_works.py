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
    """What the Life screen opens on, for every component, so that the first page of a day waits for none; then the
    panels below it.
    """
    from reliability.charts.groups import first_groups
    from reliability.life_answer import kept_life_document
    from reliability.life_panels import PANELS, panel_document

    codes, today = component_codes(), timezone.localdate()
    steps = len(codes) * (1 + len(PANELS))
    for place, code in enumerate(codes):
        progress.step(place, steps, code)
        kept_life_document(code, as_of=today, most=first_groups("part"), **FIRST_QUESTION)
    for place, code in enumerate(codes):
        for number, panel in enumerate(PANELS):
            progress.step(len(codes) + place * len(PANELS) + number, steps, f"{code}: {panel.title.lower()}")
            panel_document(code, panel.name, as_of=today, **FIRST_QUESTION)
    return {"components": len(codes)}
