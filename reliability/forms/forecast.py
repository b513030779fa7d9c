"""What the Forecast screen can be asked; all of it stands in the address."""

from __future__ import annotations

import datetime as dt
from typing import Any

from django import forms
from django.utils import timezone

from fleet.forms.record import DayInput
from fleet.models import Component, Site, SiteKind

LONGEST = 366
FURTHEST = 730


class ForecastForm(forms.Form):
    component = forms.ModelChoiceField(queryset=None, to_field_name="code", required=False, empty_label="all")
    begin = DayInput(required=False, label="From")
    end = DayInput(required=False, label="To")
    site = forms.ModelMultipleChoiceField(queryset=None, to_field_name="code", required=False, label="Sites")

    def __init__(self, *args: Any, request: Any, **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        self.fields["component"].queryset = request.seen(Component)
        self.fields["component"].label_from_instance = lambda each: each.title
        self.fields["site"].queryset = request.seen(Site).filter(kind=SiteKind.FIELD)
        self.fields["site"].label_from_instance = lambda each: each.title

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
        if end and not begin:
            self.add_error("begin", "Say from which day, too.")
        elif begin and end and not 0 <= (end - begin).days < LONGEST:
            self.add_error("end", "The last day comes after the first, at most a year later.")
        return cleaned

    def days(self) -> int | None:
        begin, end = self.cleaned_data.get("begin"), self.cleaned_data.get("end")
        return (end - begin).days + 1 if begin and end else None
