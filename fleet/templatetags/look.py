"""Template tags for writing numbers, days and estimates, and for links that keep the list's address."""

from __future__ import annotations

import datetime as dt
import re
from collections.abc import Iterable, Mapping
from decimal import Decimal
from typing import Any
from zoneinfo import ZoneInfo

from django import template
from django.utils import timezone
from django.utils.html import format_html
from django.utils.safestring import SafeString

from fleet import formats
from fleet.models.book import book_zone
from fleet.part_styles import part_style

register = template.Library()
# The drawing library reads these in any text of a figure, and more: bold, links, styles. A name may hold what it likes.
NOT_OURS = re.compile(r"<(?!br>|/?extra>)")


@register.filter
def number(value: formats.Number | None, digits: int | None = None) -> str:
    """`{{ 61400|number }}` or `{{ play|number:1 }}`"""
    return formats.number(value, digits)


@register.filter
def as_written(figure: Any) -> Any:
    """A figure whose texts are shown as they were written, whatever markup somebody put into a name."""
    if isinstance(figure, str):
        return NOT_OURS.sub("&lt;", figure)
    if isinstance(figure, Mapping):
        return {key: as_written(value) for key, value in figure.items()}
    return [as_written(value) for value in figure] if isinstance(figure, (list, tuple)) else figure


@register.filter
def percent(share: formats.Number | None, digits: int = 0) -> str:
    """`{{ 0.22|percent }}`"""
    return formats.percent(share, digits)


def shown(value: Any, zone: str = "") -> Any:
    """An instant in the named zone (a site's), else in the zone in force; a day stays the day it is."""
    if not isinstance(value, dt.datetime) or timezone.is_naive(value):
        return value
    return timezone.localtime(value, ZoneInfo(zone) if zone else zone_in_force())


def zone_in_force() -> dt.tzinfo:
    """That of the surrounding `{% timezone %}`, else the book's own: the office reads its own clock, not UTC."""
    chosen = getattr(timezone._active, "value", None)  # unset unless somebody chose a zone, be it UTC
    return chosen or ZoneInfo(book_zone())


@register.filter
def long_day(value: dt.date | None) -> str:
    """`21 January 2024`"""
    return formats.long_day(shown(value))


@register.filter
def short_day(value: dt.date | None, as_of: dt.date | None = None) -> str:
    """`4 Oct` in the year of `as_of` (today if not given), else `4 Oct 2024`."""
    return formats.short_day(shown(value), (as_of or timezone.localdate()).year)


@register.filter
def moment(value: dt.datetime | None, zone: str = "") -> str:
    """`{{ visit.happened_at|moment:site.zone }}`: `21 January 2024, 14:05` in the site's zone."""
    return formats.moment(shown(value, zone))


@register.filter
def day_in(value: dt.datetime | None, zone: str) -> str:
    """`{{ visit.happened_at|day_in:site.zone }}`: `4 Oct`, the day on which it was in the site's zone."""
    return formats.short_day(shown(value, zone), timezone.localdate().year)


@register.filter
def counted(count: int, words: str) -> str:
    """`{{ 3|counted:"module" }}`, or `"finding nothing,findings nothing"` for an odd plural."""
    one, _, many = words.partition(",")
    return formats.counted(count, one, many)


def part_of(result: Any, name: str) -> Any:
    """An end of an estimate that is an object or a mapping."""
    return result.get(name) if isinstance(result, Mapping) else getattr(result, name, None)


@register.simple_tag
def estimate(result: Any, unit: str = "", digits: int | None = None, dash: bool = False) -> SafeString:
    """A value with its interval in the softer ink; the unit `share` writes percents."""
    value, lower, upper = (part_of(result, name) for name in ("estimate", "lower", "upper"))
    places = None if digits in (None, "") else int(digits)  # a template's missing name arrives as ""
    shared = formats.estimate_digits(value) if places is None and formats.known(value) else places

    def write(end: formats.Number) -> str:
        if unit == "share":
            return formats.percent(end, places or 0)
        return formats.number(formats.rounded(end) if places is None else end, shared)

    text = write(value) if formats.known(value) else formats.NOT_KNOWN
    between = formats.ends(lower, upper, write, dash=dash)
    if unit == "share":
        between = between.replace(f"{formats.FIXED}%", "")  # the sign stands once, at the value
    written_unit = f"{formats.FIXED}{unit}" if unit not in ("", "share") and formats.known(value) else ""
    if not between:
        return format_html('<span class="est"><b>{}</b>{}</span>', text, written_unit)
    shape = '<span class="est"><b>{}</b>{} <span class="ci">{}</span></span>' if dash else None
    return format_html(shape or '<b class="num">{}</b>{} <span class="ci num">({})</span>', text, written_unit, between)


@register.simple_tag(takes_context=True)
def with_query(context: template.Context, **changes: Any) -> str:
    """This page's query with the given keys set, or taken out where the value is empty."""
    query = context["request"].GET.copy() if "request" in context else None
    if query is None:
        return "?"
    for key, value in changes.items():
        if value in (None, ""):
            query.pop(key, None)
        else:
            query[key] = value
    return f"?{query.urlencode()}"


@register.simple_tag(takes_context=True)
def sort_url(context: template.Context, key: str) -> str:
    """A link that sorts by the key, the other way round when it already does; back on the first page."""
    now = context["request"].GET.get("sort", "") if "request" in context else ""
    return with_query(context, sort=f"-{key}" if now == key else key, page="")


@register.simple_tag(takes_context=True)
def sort_state(context: template.Context, key: str) -> str:
    """The word for `aria-sort`, empty where the list is not sorted by the key."""
    now = context["request"].GET.get("sort", "") if "request" in context else ""
    return {key: "ascending", f"-{key}": "descending"}.get(now, "")


@register.simple_tag(takes_context=True)
def first_on_page(context: template.Context, name: str) -> bool:
    """True the first time on a page: what a chart brings along is brought once, however many charts there are."""
    request = getattr(context, "request", None) or context.get("request")
    seen = context.dicts[0] if request is None else request.__dict__
    key = f"_seen_{name}"
    first = key not in seen
    seen[key] = True
    return first


def written(value: Any, digits: int | None) -> Any:
    """A cell's plain value as people read it; text, and what is marked as safe, stays as it is."""
    if value is None or value == "":
        return "–"
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, int | float | Decimal):
        return formats.number(value, digits)
    if isinstance(value, dt.datetime):
        return moment(value)
    if isinstance(value, dt.date):
        return short_day(value)
    return value


CODE = re.compile(r"[A-Z0-9.]{1,8}(-[A-Z0-9.]{1,8}){1,2}")  # a short code with a dash, which must not break there


@register.filter
def cells(row: Any, columns: Iterable[Mapping[str, Any]]) -> list[tuple[Mapping[str, Any], dict[str, Any]]]:
    """Each column with its cell; a cell may be a plain value or a mapping (see `parts/table.html`)."""
    values = row["cells"] if isinstance(row, Mapping) else row
    pairs = []
    for column, value in zip(columns, values, strict=True):
        cell = dict(value) if isinstance(value, Mapping) else {"text": value}
        cell["blank"] = "estimate" not in cell and "state" not in cell and cell.get("text") in (None, "")
        cell["text"] = written(cell.get("text"), cell.get("digits", column.get("digits")))
        cell["code"] = bool(CODE.fullmatch(str(cell["text"])))
        pairs.append((column, cell))
    return pairs


@register.filter
def style_of(rank: int) -> Any:
    """The part style of a rank, for `parts/key.html`."""
    return part_style(int(rank))


@register.filter
def page_window(page: Any) -> Iterable[Any]:
    """The page numbers worth showing, with gaps."""
    return page.paginator.get_elided_page_range(page.number, on_each_side=1, on_ends=1)


@register.filter
def widget_kind(field: Any) -> str:
    """The control's sort in a word: tick, choices, file or line, so that a field is laid out by what it is."""
    from django.forms import widgets

    control = field.field.widget
    if isinstance(control, widgets.CheckboxSelectMultiple | widgets.RadioSelect):
        return "choices"
    if isinstance(control, widgets.CheckboxInput):
        return "tick"
    return "file" if isinstance(control, widgets.FileInput) else "line"
