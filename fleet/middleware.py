"""Who is writing, and whether they may: set for every request before any view runs."""

from __future__ import annotations

import logging
from collections.abc import Callable
from typing import Any
from urllib.parse import urlsplit

from django.contrib.auth.views import redirect_to_login
from django.core.exceptions import PermissionDenied
from django.db import OperationalError
from django.http import HttpRequest, HttpResponse
from django.shortcuts import render
from django_htmx.http import HttpResponseClientRedirect

from fleet.actions.base import waited_too_long
from fleet.carried import carried
from fleet.history import writing
from fleet.models.book import zone_read_once
from fleet.rights import PUBLIC, may, seen_by
from fleet.views.errors import sign_in_first

log = logging.getLogger(__name__)
GetResponse = Callable[[HttpRequest], HttpResponse]


class WriterMiddleware:
    """Stamps everything a request writes with the person and “browser”."""

    def __init__(self, get_response: GetResponse) -> None:
        self.get_response = get_response

    def __call__(self, request: HttpRequest) -> HttpResponse:
        person = request.user if request.user.is_authenticated else None
        with writing(person=person, source="browser"), zone_read_once():
            return self.get_response(request)

    def process_exception(self, request: HttpRequest, error: Exception) -> HttpResponse | None:
        """What no action put into words: a sign-in, say, while an import is written on the embedded database."""
        if not (isinstance(error, OperationalError) and waited_too_long(error)):
            return None
        log.exception("A page waited too long for the database.")
        answer = render(request, "503.html", status=503)
        answer["Retry-After"] = "60"
        return answer


class RightsMiddleware:
    """Refuses every view that names no right, and every person who does not hold it.

    What somebody is shown is theirs: no proxy on the way may keep it for the next one who asks.
    """

    def __init__(self, get_response: GetResponse) -> None:
        self.get_response = get_response

    def __call__(self, request: HttpRequest) -> HttpResponse:
        answer = self.get_response(request)
        if request.user.is_authenticated and not answer.has_header("Cache-Control"):
            answer["Cache-Control"] = "private"
        return answer

    def process_view(self, request: Any, view: Callable[..., Any], args: Any, kwargs: Any) -> HttpResponse | None:
        right = getattr(view, "right", None)
        if right == PUBLIC:
            return None
        if not request.user.is_authenticated:
            return ask_who_it_is(request)
        if right is None or not may(request.user, right):
            raise PermissionDenied
        request.seen = lambda model: seen_by(request.user, model)
        return None


def page_around(request: HttpRequest) -> str:
    """The path of the page that asked for a part of itself."""
    try:
        page = urlsplit(request.headers.get("HX-Current-URL", ""))
    except ValueError:  # no address at all
        return request.get_full_path()
    return page._replace(scheme="", netloc="").geturl() or request.get_full_path()


def ask_who_it_is(request: Any) -> HttpResponse:
    """To the sign-in page; what was entered goes along, and a part of a page sends its whole page there."""
    kept = carried(request)
    if kept:
        return sign_in_first(request, kept)
    if request.headers.get("HX-Request"):
        return HttpResponseClientRedirect(redirect_to_login(page_around(request)).url)
    return redirect_to_login(request.get_full_path())
