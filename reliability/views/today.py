"""Today: what needs a decision, from the records and from the estimates."""

from __future__ import annotations

import datetime as dt
from typing import Any

from django.http import HttpResponse
from django.shortcuts import render

from fleet.models import Component
from fleet.rights import LIFE, SEE, may, needs
from fleet.today import records_today
from reliability.stock_today import bench_ahead, running_out


@needs(SEE)
def today(request: Any) -> HttpResponse:
    context = records_today(request)
    context["running_out"] = running_out(request.user, context["today"])
    context["bench_ahead"] = bench_ahead(request.user, context["today"])
    # Expectations are learned from all sites, and so are the figures beside them.
    if may(request.user, LIFE) and request.user.all_sites:
        context["expected"] = expected(request, context["today"])
    return render(request, "today/page.html", context)


def expected(request: Any, day: dt.date) -> dict[str, Any]:
    """Whether this week and this quarter are unusual; empty while no component is in the catalogue."""
    from reliability.forecasts.expected_now import expected_now
    from reliability.forecasts.expected_words import told

    components = list(request.seen(Component))
    return told(expected_now(components), day) if components else {}
