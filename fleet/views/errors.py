"""Refusals as pages, in words."""

from __future__ import annotations

from typing import Any

from django.http import HttpRequest, HttpResponse
from django.shortcuts import render

from fleet.carried import carried, from_own_page, opened
from fleet.forms.sign_in import SignInForm


def csrf_failure(request: HttpRequest, reason: str = "") -> HttpResponse:
    """The form's safety token is missing or old: usually a page left open over a sign-out, with an entry in it."""
    kept = carried(request) if from_own_page(request) else ""
    if not kept:
        return render(request, "403_csrf.html", status=403)
    return send_again(request, opened(kept)) if request.user.is_authenticated else sign_in_first(request, kept)


def sign_in_first(request: HttpRequest, kept: str) -> HttpResponse:
    """Asks who it is, and keeps what was entered meanwhile."""
    context = {"form": SignInForm(request), "next": request.get_full_path(), "carried": kept}
    return render(request, "sign_in/sign_in.html", context, status=403)


def send_again(request: HttpRequest, entry: Any) -> HttpResponse:
    """The entry once more, to be sent or left by the person who is signed in now."""
    return render(request, "sign_in/send_again.html", {"entry": entry})
