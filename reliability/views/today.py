"""Today: what needs a decision, from the records and from the estimates."""

from __future__ import annotations

from typing import Any

from django.http import HttpResponse
from django.shortcuts import render

from fleet.rights import SEE, needs
from fleet.today import records_today


@needs(SEE)
def today(request: Any) -> HttpResponse:
    return render(request, "today/page.html", records_today(request))
