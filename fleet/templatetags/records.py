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


@register.filter
def first_sentence(text: str) -> str:
    """The first line, or the first sentence of it: what stays in sight when the rest is folded away."""
    line = text.strip().split("\n", 1)[0].strip()
    return line.split(". ", 1)[0].rstrip(".") + "." if line else ""


@register.filter
def after_first_sentence(text: str) -> str:
    rest = text.strip()[len(first_sentence(text)) - 1 :]
    return rest.lstrip(". \n\r")
