"""What must be right before the book opens."""

from __future__ import annotations

from django.conf import settings
from django.core.checks import CheckMessage, Warning, register

from config.sqlite import SAFE_SQLITE


@register()
def sqlite_is_safe(**_: object) -> list[CheckMessage]:
    embedded = settings.DATABASES["default"]["ENGINE"].endswith("sqlite3")
    if not embedded or settings.SQLITE_VERSION >= SAFE_SQLITE:
        return []
    version = ".".join(str(part) for part in settings.SQLITE_VERSION)
    return [
        Warning(
            f"SQLite {version} can lose a committed entry (sqlite.org/wal.html#walresetbug).",
            hint="Install pysqlite3 (x86_64 Linux) or a Python with SQLite 3.51.3 or later, or use PostgreSQL.",
            id="fleet.W001",
        )
    ]
