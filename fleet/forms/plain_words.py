"""What the form library says by itself, in words that name the state, the value and the remedy."""

from __future__ import annotations

from decimal import Decimal
from typing import Any

from django import forms
from django.core import validators

from fleet.formats import number


class Told(str):
    """A sentence whose numbers stand as people write them: 24, not 24.0."""

    __slots__ = ()

    def __mod__(self, values: Any) -> str:
        return str.__mod__(self, {name: as_written(value) for name, value in values.items()})


def as_written(value: Any) -> Any:
    if not isinstance(value, int | float | Decimal) or value != value:
        return value
    return number(value, 0) if value == round(value) else f"{value:.10g}"


NEEDED = "This is empty, and it is needed. Enter it."
NOT_CHOSEN = "Nothing is chosen here. Choose one of the list."
NO_WHOLE_NUMBER = "This is no whole number. Write it like 12."
NO_NUMBER = "This is no number. Write it like 2.5."
NO_CHOICE = "This is not among the choices. Choose one of the list."
TOO_MUCH = Told("%(show_value)s is too much. Enter at most %(limit_value)s.")
TOO_LITTLE = Told("%(show_value)s is too little. Enter %(limit_value)s or more.")
TOO_LONG = "This has %(show_value)s characters. Shorten it to %(limit_value)s."
NO_SUCH_CHARACTER = "There is a character in it that cannot be kept. Type it once more."
DIGITS = {
    "max_digits": "This has more than %(max)s digits. Shorten it.",
    "max_decimal_places": "This has more than %(max)s digits after the point. Round it.",
    "max_whole_digits": "This has more than %(max)s digits before the point. Enter a smaller one.",
}


def speak_plainly() -> None:
    """Called once, before the first form is made; a field's own message still comes first."""
    said: dict[type[forms.Field], dict[str, str]] = {
        forms.Field: {"required": NEEDED},
        forms.IntegerField: {"invalid": NO_WHOLE_NUMBER},
        forms.FloatField: {"invalid": NO_NUMBER},
        forms.DecimalField: {"invalid": NO_NUMBER},
        forms.ChoiceField: {"invalid_choice": NO_CHOICE, "required": NOT_CHOSEN},
        forms.ModelChoiceField: {"invalid_choice": NO_CHOICE, "required": NOT_CHOSEN},
        forms.ModelMultipleChoiceField: {"invalid_choice": NO_CHOICE, "required": NOT_CHOSEN},
    }
    for kind, words in said.items():
        kind.default_error_messages = {**kind.default_error_messages, **words}
    for validator, message in (
        (validators.MaxValueValidator, TOO_MUCH),
        (validators.MinValueValidator, TOO_LITTLE),
        (validators.MaxLengthValidator, TOO_LONG),
        (validators.ProhibitNullCharactersValidator, NO_SUCH_CHARACTER),
    ):
        validator.message = message
    validators.DecimalValidator.messages = {**validators.DecimalValidator.messages, **DIGITS}
