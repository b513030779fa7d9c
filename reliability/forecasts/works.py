"""Background work on estimates."""

from __future__ import annotations

from typing import Any

from fleet.models import Book, Component, Work
from fleet.work import Progress, work_kind


@work_kind("count_forecasts", daily="Counting next quarter")
def count_forecasts(work: Work, progress: Progress) -> dict[str, Any]:
    """Next quarter of every component at the book's service level, so that no page waits for it."""
    from reliability.forecasts.kept_forecast import kept_forecast
    from reliability.forecasts.next_quarter import question_of
    from reliability.forecasts.what_if import WhatIf

    usual = WhatIf(service_level=Book.load().service_level)
    components = list(Component.objects.all())
    for place, component in enumerate(components):
        progress.step(place, len(components), component.title)
        kept_forecast(question_of(component, what_if=usual), again=True)
    return {"components": len(components)}
