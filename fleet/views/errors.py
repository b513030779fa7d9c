"""Refusals as pages, in words."""

from __future__ import annotations

from django.http import HttpRequest, HttpResponse
from django.shortcuts import render


def csrf_failure(request: HttpRequest, reason: str = "") -> HttpResponse:
    """The form's safety token is missing or old: usually a page left open over a sign-out."""
    return render(request, "403_csrf.html", status=403)
