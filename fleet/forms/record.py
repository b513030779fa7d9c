"""The base of forms that save one record through its action, held to the version that was opened."""

from __future__ import annotations

import datetime as dt
from typing import Any, ClassVar
from zoneinfo import ZoneInfo

from django import forms
from django.core.exceptions import ValidationError

from fleet.forms.instants import instant_of
from fleet.models.codes import CODE_LENGTH, clean_code, validate_code

LOST_VERSION = "The form has lost which state of the record it showed. Open it again, and enter your change there."


class CodeInput(forms.CharField):
    """A code as people type it; stored upper case."""

    def __init__(self, **kwargs: Any) -> None:
        kwargs.setdefault("max_length", CODE_LENGTH)
        kwargs.setdefault("help_text", "Letters A–Z, digits, dash, dot, underscore.")
        super().__init__(**kwargs)
        self.widget.attrs.update({"autocapitalize": "characters", "spellcheck": "false", "autocomplete": "off"})

    def clean(self, value: Any) -> str:
        code = clean_code(super().clean(value))
        if code:
            validate_code(code)
        return code


class DayInput(forms.DateField):
    """A day, picked or typed as 2026-03-09."""

    widget = forms.DateInput(attrs={"type": "date"}, format="%Y-%m-%d")

    def __init__(self, **kwargs: Any) -> None:
        kwargs.setdefault("input_formats", ["%Y-%m-%d"])
        kwargs.setdefault("error_messages", {"invalid": "This is no day. Write it like 2026-03-09."})
        super().__init__(**kwargs)


class InstantInput(forms.DateTimeField):
    """A day and time as the clock at the site shows them."""

    def __init__(self, *, zone: ZoneInfo, **kwargs: Any) -> None:
        self.zone = zone
        kwargs.setdefault("widget", forms.DateTimeInput(attrs={"type": "datetime-local"}, format="%Y-%m-%dT%H:%M"))
        kwargs.setdefault("input_formats", ["%Y-%m-%dT%H:%M", "%Y-%m-%dT%H:%M:%S", "%Y-%m-%d %H:%M"])
        kwargs.setdefault("error_messages", {"invalid": "This is no time. Write it like 2026-03-09 14:05."})
        super().__init__(**kwargs)

    def prepare_value(self, value: Any) -> Any:
        if isinstance(value, dt.datetime) and value.tzinfo is not None:
            return value.astimezone(self.zone).replace(tzinfo=None)
        return value

    def to_python(self, value: Any) -> Any:
        if value in self.empty_values:
            return None
        for pattern in self.input_formats:
            try:
                local = dt.datetime.strptime(str(value).strip(), pattern)  # noqa: DTZ007  (given its zone below)
            except ValueError:
                continue
            return instant_of(local.date(), local.time(), self.zone)
        raise ValidationError(self.error_messages["invalid"], code="invalid")


class VersionField(forms.IntegerField):
    """Which state of a record a form shows; without it nobody could be told what changed meanwhile."""

    widget = forms.HiddenInput

    def __init__(self, **kwargs: Any) -> None:
        super().__init__(**kwargs)
        self.error_messages = dict.fromkeys(("required", "invalid"), LOST_VERSION)

    def clean(self, value: Any) -> int | None:
        version: int | None = super().clean(value)
        if version is not None and not 1 <= version < 2**31:
            raise ValidationError(LOST_VERSION)
        return version


class RecordForm(forms.Form):
    """`record` is None for a new one; `save_by` hands what was typed to the action."""

    version = VersionField(required=False)
    noun: ClassVar[str] = ""  # the action's argument: site, part …

    def __init__(self, *args: Any, record: Any, request: Any, **kwargs: Any) -> None:
        self.record, self.request = record, request
        initial = (self.opened(record) if record is not None else {}) | kwargs.pop("initial", {})
        super().__init__(*args, initial=initial, **kwargs)
        if "version" in self.fields:
            self.fields["version"].required = record is not None
        self.prepare()

    def prepare(self) -> None:
        """Choices that depend on the person."""

    def opened(self, record: Any) -> dict[str, Any]:
        """What the form shows of a stored record."""
        names = [name for name in self.base_fields if hasattr(record, name)]
        return {name: getattr(record, name) for name in names}

    def action(self) -> Any:
        raise ValidationError("This form saves nothing.")

    def fields_to_save(self) -> dict[str, Any]:
        return {name: value for name, value in self.cleaned_data.items() if name != "version"}

    def save_by(self, person: Any) -> Any:
        return self.action()(
            by=person,
            version=self.cleaned_data.get("version"),
            **{self.noun: self.record},
            **self.fields_to_save(),
        )
