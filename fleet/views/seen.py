"""Fetching what an address names, as far as the person may see it; anything else is not there."""

from __future__ import annotations

from typing import Any

from django.http import Http404

from fleet.models import Module
from fleet.models.codes import CODE_PATTERN, clean_code


def seen_module(request: Any, tag: str) -> Module:
    """The module of a tag, however it is spelt; with its place and state."""
    code = clean_code(tag)
    if not CODE_PATTERN.match(code):
        raise Http404(f"No module {tag[:40]!r}")
    module = request.seen(Module).with_state().select_related("type").filter(code=code).first()
    if module is None:
        raise Http404(f"No module {code[:40]}")
    return module
