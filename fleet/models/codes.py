"""Codes people use: A-Z, digits, dash, dot, underscore; stored upper case, sorted naturally."""

from __future__ import annotations

import re
import secrets
from typing import Any

from django.core.exceptions import ValidationError
from django.db import models

CODE_PATTERN = re.compile(r"[A-Z0-9][A-Z0-9._-]*\Z")
CODE_LENGTH = 40
READABLE = "23456789ABCDEFGHJKMNPQRSTVWXYZ"  # no 0/O, 1/I/L, U


def clean_code(text: str) -> str:
    """The stored form of what somebody typed."""
    return str(text).strip().upper()


def validate_code(value: str) -> None:
    if not CODE_PATTERN.match(value) or len(value) > CODE_LENGTH:
        shown = value if len(value) <= 60 else value[:60] + "…"
        raise ValidationError(
            f"“{shown}” is no code. Use letters A–Z, digits, dash, dot and underscore, at most {CODE_LENGTH}."
        )


def natural_key(code: str) -> str:
    """Sorts K-9 before K-10: each run of digits is padded to 12 places."""
    return re.sub(r"\d+", lambda run: run.group().lstrip("0").rjust(12, "0"), code)[:200]


def new_code(prefix: str) -> str:
    """A code for a record that the program names itself (a visit, a fitting)."""
    return f"{prefix}-" + "".join(secrets.choice(READABLE) for _ in range(10))


class CodeField(models.CharField):
    def __init__(self, *args: Any, **kwargs: Any) -> None:
        kwargs.setdefault("max_length", CODE_LENGTH)
        kwargs.setdefault("validators", [validate_code])
        super().__init__(*args, **kwargs)

    def to_python(self, value: Any) -> Any:
        value = super().to_python(value)
        return clean_code(value) if isinstance(value, str) else value

    def get_prep_value(self, value: Any) -> Any:
        value = super().get_prep_value(value)
        return clean_code(value) if isinstance(value, str) else value


class Coded(models.Model):
    """A record with a code of its own; `code_order` is the code in its natural order."""

    code = CodeField(unique=True)
    code_order = models.CharField(max_length=200, editable=False, default="", db_index=True)

    class Meta:
        abstract = True
        ordering = ["code_order"]

    def __str__(self) -> str:
        return self.code

    def save(self, *args: Any, **kwargs: Any) -> None:
        self.code = clean_code(self.code)
        self.code_order = natural_key(self.code)
        super().save(*args, **kwargs)
