"""Which program made an answer: written beside whatever is kept for years."""

from __future__ import annotations

import tomllib
from functools import cache

from django.conf import settings

from reliability.kept import METHODS_VERSION


@cache
def program_version() -> str:
    """`0.1.0, methods 1`"""
    with (settings.BASE_DIR / "pyproject.toml").open("rb") as file:
        number = tomllib.load(file)["project"]["version"]
    return f"{number}, methods {METHODS_VERSION}"
