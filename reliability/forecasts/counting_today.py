"""Who counts today's use when the first one asks: the background, so that no page waits for it."""

from __future__ import annotations

import datetime as dt

from django.utils import timezone

from fleet.models import Component, Person, Work, WorkState
from fleet.work import enqueue
from reliability.forecasts.coming_use import all_counted

KIND = "count_use"
TITLE = "Counting what will be used"
TRIED_AGAIN_AFTER = dt.timedelta(minutes=5)


def counted_today() -> bool:
    return all_counted(Component.objects.all())


def being_counted(person: Person) -> Work:
    """The count on its way, or one that failed just now; else one is put in line.

    The day's own count may still wait behind other work that nobody waits for: then somebody's comes before it.
    """
    last = Work.objects.filter(kind=KIND).exclude(state=WorkState.WAITING, person__isnull=True).first()
    if last is not None and not last.ended:
        return last
    if last is not None and last.state != WorkState.DONE and timezone.now() - last.made_at < TRIED_AGAIN_AFTER:
        return last
    return enqueue(KIND, TITLE, {}, person)
