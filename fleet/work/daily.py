"""Work that is done once a day without anybody asking, by whichever worker looks first."""

from __future__ import annotations

import datetime as dt

from django.utils import timezone

from fleet.models import Module, Work
from fleet.work.enqueue import enqueue
from fleet.work.kinds import daily_kinds


def enqueue_due(now: dt.datetime | None = None) -> list[Work]:
    """Puts today's work in line; two workers at one moment may both do so, which costs a little and harms nothing."""
    today = (now or timezone.now()).date()
    begin = dt.datetime.combine(today, dt.time(), tzinfo=dt.UTC)
    kinds = daily_kinds()
    if not kinds or not Module.objects.exists():
        return []
    done = set(Work.objects.filter(kind__in=kinds, made_at__gte=begin).values_list("kind", flat=True))
    return [enqueue(kind, title, {}, None) for kind, title in kinds.items() if kind not in done]
