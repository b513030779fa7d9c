"""The head of every page: the screens that exist and that the person may see."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from django.http import HttpRequest
from django.urls import NoReverseMatch, reverse

from fleet.rights import BENCH, CATALOGUE, LIFE, LOG, PEOPLE, SEE, STORES, may


@dataclass(frozen=True)
class Screen:
    name: str
    url_name: str
    right: str


SCREENS = [
    Screen("Today", "today", SEE),
    Screen("Sites", "sites", SEE),
    Screen("Modules", "modules", SEE),
    Screen("Log", "log", LOG),
    Screen("Bench", "bench", BENCH),
    Screen("Stores", "stores", STORES),
    Screen("Life", "life", LIFE),
    Screen("Forecast", "forecast", LIFE),
    Screen("Redesigns", "redesigns", LIFE),
]
OFFICE_SCREENS = [
    Screen("Catalogue", "catalogue", CATALOGUE),
    Screen("Records in and out", "records", CATALOGUE),
    Screen("History of changes", "history", CATALOGUE),
    Screen("People", "people", PEOPLE),
    Screen("Book settings", "book", PEOPLE),
]


def links(screens: list[Screen], request: Any) -> list[dict[str, Any]]:
    here = request.path
    rows = []
    for screen in screens:
        if not may(request.user, screen.right):
            continue
        try:
            url = reverse(screen.url_name)
        except NoReverseMatch:  # a screen that is not built is not shown
            continue
        rows.append({"name": screen.name, "url": url, "current": here == url or (url != "/" and here.startswith(url))})
    return rows


def head(request: HttpRequest) -> dict[str, Any]:
    """Context for base.html."""
    if not getattr(request, "user", None) or not request.user.is_authenticated:
        return {"screens": [], "office_screens": []}
    return {"screens": links(SCREENS, request), "office_screens": links(OFFICE_SCREENS, request)}
