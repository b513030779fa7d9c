"""What the Forecast screen can be asked; all of it stands in the address."""

from __future__ import annotations

import datetime as dt
from typing import Any

import django_filters
from django import forms
from django.utils import timezone

from fleet.forms.filters import SeenChoice
from fleet.forms.record import DayInput
from fleet.models import Book, Component, Site, SiteKind

LONGEST = 366
FURTHEST = 730


class ForecastForm(forms.Form):
    component = forms.ModelChoiceField(queryset=None, to_field_name="code", required=False, empty_label="all")
    begin = DayInput(required=False, label="From")
    end = DayInput(required=False, label="To")
    site = forms.ModelMultipleChoiceField(queryset=None, to_field_name="code", required=False, label="Sites")
    service = forms.FloatField(
        required=False,
        min_value=50,
        max_value=99.9,
        label="Enough in so many of 100 cases",
        error_messages={
            "min_value": "Fewer than 50 of 100 is no plan. Write 50 to 99.9.",
            "max_value": "No stock is enough for certain. Write 50 to 99.9.",
        },
    )

    def __init__(self, *args: Any, request: Any, **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        self.fields["component"].queryset = request.seen(Component)
        self.fields["component"].label_from_instance = lambda each: each.title
        self.fields["component"].error_messages["invalid_choice"] = "There is no such component in this book."
        self.fields["site"].queryset = request.seen(Site).filter(kind=SiteKind.FIELD)
        self.fields["site"].label_from_instance = lambda each: each.title
        self.fields["site"].error_messages["invalid_choice"] = "“%(value)s” is no field site of yours."
        self.usual_service = 100 * Book.load().service_level
        self.fields["service"].widget.attrs |= {"placeholder": f"{self.usual_service:g}", "step": "any"}

    def choices(self) -> list[Any]:
        """The bound fields above the page; the service level stands among the what-ifs."""
        return [self[name] for name in ("component", "begin", "end", "site")]

    def clean_begin(self) -> dt.date | None:
        begin = self.cleaned_data["begin"]
        today = timezone.localdate()
        if begin and begin < today:
            raise forms.ValidationError("This day has passed. A forecast begins today or later.")
        if begin and (begin - today).days > FURTHEST:
            raise forms.ValidationError("This is more than two years ahead. Nobody can tell that far.")
        return begin

    def clean(self) -> dict[str, Any]:
        cleaned = super().clean() or self.cleaned_data
        begin, end = cleaned.get("begin"), cleaned.get("end")
        if end and not begin and "begin" not in self.errors:
            self.add_error("begin", "Say from which day, too.")
        elif begin and end and end < begin:
            self.add_error("end", "The last day lies before the first. Exchange them.")
        elif begin and end and (end - begin).days >= LONGEST:
            self.add_error("end", "This is more than a year. Choose a last day at most a year after the first.")
        return cleaned

    def days(self) -> int | None:
        begin, end = self.cleaned_data.get("begin"), self.cleaned_data.get("end")
        return (end - begin).days + 1 if begin and end else None

    def service_level(self) -> float:
        asked = self.cleaned_data.get("service")
        return float(f"{(self.usual_service if asked is None else asked) / 100:.6g}")


class KeptFilter(django_filters.FilterSet):
    """What the list of kept forecasts can be narrowed by."""

    component = SeenChoice(Component, label="Component")
    q = django_filters.CharFilter(label="In the note", field_name="note", lookup_expr="icontains")


class KeepForm(forms.Form):
    """The note beside a forecast that is kept."""

    note = forms.CharField(
        max_length=500,
        required=False,
        label="Note",
        widget=forms.TextInput(attrs={"autocomplete": "off"}),
        help_text="What it is kept for, for whoever reads it later.",
    )
    entry_key = forms.UUIDField(widget=forms.HiddenInput, required=False)
