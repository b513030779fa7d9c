"""Filling in the log form as a browser without scripts would send it."""

from __future__ import annotations

from typing import Any

from django.test import Client
from django.urls import reverse

from fleet.models import Module, Position


def log_address(module: Module) -> str:
    return reverse("log_visit", args=[module.code])


def opened(client: Client, module: Module) -> dict[str, str]:
    """What the form holds when it is opened: key, day, time, how it is left, the likely parts."""
    sheet = client.get(log_address(module)).context["sheet"]
    data: dict[str, str] = {}
    for form in [sheet.visit, *sheet.positions]:
        for field in form:
            value = field.value()
            if value not in (None, "", False):
                data[field.html_name] = written(value)
    return data


def written(value: Any) -> str:
    return value.strftime("%H:%M") if hasattr(value, "minute") else str(value)


def at(position: Position, **fields: Any) -> dict[str, str]:
    return {f"p{position.pk}-{name}": written(getattr(value, "pk", value)) for name, value in fields.items()}


def send(client: Client, module: Module, *parts: dict[str, str], **more: Any) -> Any:
    data = opened(client, module)
    for part in parts:
        data |= part
    data |= {"finish": "done"} | {name: str(value) for name, value in more.items()}
    return client.post(log_address(module), data)
