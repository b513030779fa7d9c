"""Codes in addresses: whatever is no code is no page, before any database is asked."""

from __future__ import annotations

from django.urls import register_converter

from fleet.models.codes import CODE_LENGTH


class CodeConverter:
    regex = rf"[A-Za-z0-9][A-Za-z0-9._-]{{0,{CODE_LENGTH - 1}}}"

    def to_python(self, value: str) -> str:
        return value.upper()

    def to_url(self, value: str) -> str:
        return str(value)


register_converter(CodeConverter, "code")
