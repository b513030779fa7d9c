"""Time zones by name, checked."""

from __future__ import annotations

from functools import cache
from zoneinfo import ZoneInfo, available_timezones

from django.core.exceptions import ValidationError


@cache
def zone_names() -> frozenset[str]:
    return frozenset(available_timezones())


def validate_zone(value: str) -> None:
    if value not in zone_names():
        raise ValidationError(f"“{value[:60]}” is no time zone. Write it like Europe/Lisbon.")


@cache
def zone(name: str) -> ZoneInfo:
    return ZoneInfo(name)
