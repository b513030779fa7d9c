"""A choice among records that are already in hand: no query, and the record itself as the cleaned value."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

from django import forms


class TileField(forms.ChoiceField):
    """A choice whose refusal does not repeat what was sent: that was no person's typing."""

    default_error_messages = {
        "invalid_choice": "This is not among the choices here. Choose one of the list.",
        "required": "Choose one.",
    }


class PickField(TileField):
    """`options` are (record, words); the cleaned value is the record, or None where nothing was picked.

    `nothing` are the words for picking none; `nothing_value` tells that apart from not having chosen at all.
    """

    def __init__(
        self, options: Iterable[tuple[Any, str]], *, nothing: str | None = None, nothing_value: str = "", **kwargs: Any
    ) -> None:
        pairs = list(options)
        self.records = {str(record.pk): record for record, _ in pairs}
        choices = [(str(record.pk), words) for record, words in pairs]
        if nothing is not None:
            # A deliberate “not known” is the last resort; an empty first line is where lists begin.
            choices = [*choices, (nothing_value, nothing)] if nothing_value else [("", nothing), *choices]
        super().__init__(choices=choices, **kwargs)

    def prepare_value(self, value: Any) -> Any:
        return str(value.pk) if hasattr(value, "pk") else value

    def clean(self, value: Any) -> Any:
        return self.records.get(super().clean(value))
