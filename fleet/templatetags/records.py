"""Template filters of the record screens."""

from __future__ import annotations

import datetime as dt
from typing import Any

from django import template
from django.utils.html import escape
from django.utils.safestring import SafeString, mark_safe

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


@register.simple_tag
def tiles(field: Any, begin: int = 0, end: int | None = None, css: str = "") -> SafeString:
    """A choice field as tiles for the thumb; written here, as a page of them is too much for nested templates."""
    value = field.value()
    chosen = "" if value is None else str(value)
    name, auto_id = escape(field.html_name), escape(field.auto_id)
    labels = [
        f'<label class="tile"><input type="radio" name="{name}" value="{escape(key)}" id="{auto_id}_{place}"'
        f"{' checked' if str(key) == chosen else ''}><span>{escape(words)}</span></label>"
        for place, (key, words) in enumerate(field.field.choices)
    ]
    return mark_safe(f'<div class="log-tiles {escape(css)}">{"".join(labels[begin:end])}</div>')
