"""What somebody had entered when the book no longer knew them: it travels signed in the page until they are back.

A day in the rain ends with an entry on a phone that was signed out from afar, or whose eight weeks were over.
Nothing of it is lost: the page that asks for the password carries it, and the person sends it once more.
"""

from __future__ import annotations

from typing import Any

from django.core import signing
from django.http import HttpRequest

SALT = "an entry that waits for its person"
LONGEST = 24 * 3600
NO_ENTRY = {"csrfmiddlewaretoken", "next", "carried"}


def carried(request: HttpRequest) -> str:
    """The entry in a request, as one signed text; empty where there is none to keep, or where it holds a password."""
    if request.method != "POST":
        return ""
    fields = [[name, value] for name, values in request.POST.lists() if name not in NO_ENTRY for value in values]
    if not fields or any("password" in name for name, _ in fields):
        return ""
    entry = {"to": request.get_full_path(), "fields": fields, "files": bool(request.FILES)}
    return signing.dumps(entry, salt=SALT, compress=True)


def opened(text: str) -> dict[str, Any] | None:
    """The entry in a signed text, if this book signed it within a day."""
    try:
        return signing.loads(text, salt=SALT, max_age=LONGEST)
    except signing.BadSignature:
        return None


def from_own_page(request: HttpRequest) -> bool:
    """Whether a browser says that a page of this book sent the request; no page elsewhere can make it say so."""
    origin = f"{request.scheme}://{request.get_host()}"
    return request.headers.get("Sec-Fetch-Site") == "same-origin" or request.headers.get("Origin") == origin
