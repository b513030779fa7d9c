"""Forecast documents read where they were counted before from the same data."""

from __future__ import annotations

from typing import Any

from fleet.models import Component
from reliability.forecasts.next_quarter import Question, forecast_document
from reliability.kept import kept


def kept_forecast(question: Question) -> dict[str, Any]:
    """As `forecast_document` with the usual bands."""
    asked = {
        "component": question.component.code,
        "begin": question.begin.isoformat(),
        "days": question.days,
        "as_of": question.as_of.isoformat(),
        "sites": list(question.sites) if question.sites is not None else None,
        "by_type": question.by_type,
    }
    return kept("forecast", asked, lambda: forecast_document(question))


def expected_order(components: list[Component], documents: dict[str, dict[str, Any]]) -> list[Component]:
    """Those with the most expected failures first."""
    return sorted(components, key=lambda each: -documents[each.code]["total"]["mean"])
