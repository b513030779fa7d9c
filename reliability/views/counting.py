"""Pages that rest on today's count of use: shown at once, and filled by themselves when the count is there."""

from __future__ import annotations

import datetime as dt
from typing import Any

from django.utils import timezone

from fleet.formats import moment
from fleet.models import Work, WorkState

LOOKS = "counting"  # the element of work/counting.html that looks again and again
WAITED_LONG = dt.timedelta(minutes=1)

Document = dict[str, Any]


def is_page(request: Any) -> bool:
    """A file, a sheet of paper and what is sent wait for the count; a page need not."""
    return request.method == "GET" and "as" not in request.GET


def still_counting(request: Any, target: str, *, also: str = "") -> Document | None:
    """For work/counting.html, while today's use is not counted: `target` is replaced once it is.

    unchanged: only the page's own look, to which nothing has to be answered yet.
    """
    from reliability.forecasts.counting_today import being_counted, counted_today

    if counted_today():
        return None
    work = being_counted(request.user)
    looks = bool(request.htmx) and request.htmx.trigger == LOOKS
    return {
        "url": request.get_full_path(),
        "target": target,
        "also": also,
        "trouble": trouble(work),
        "unchanged": looks and not work.ended,
    }


def trouble(work: Work) -> str:
    """Why it may take long."""
    if work.ended:
        return f"The last try came to no end. {work.message} It is tried again within minutes."
    if work.state == WorkState.WAITING and timezone.now() - work.made_at > WAITED_LONG:
        return f"It has been waiting since {moment(work.made_at)} UTC. Tell whoever runs this program if it goes on."
    return ""
