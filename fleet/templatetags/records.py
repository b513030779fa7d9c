"""Template filters of the record screens."""

from __future__ import annotations

import datetime as dt

from django import template

from fleet import formats

register = template.Library()


@register.filter
def minutes(duration: dt.timedelta) -> str:
    """`15 minutes`"""
    return formats.counted(max(1, round(duration.total_seconds() / 60)), "minute")
