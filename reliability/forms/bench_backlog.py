"""What the bench's forecast may be asked: by when the target, more hours, another pace of retrofits."""

from __future__ import annotations

import datetime as dt
from typing import Any

from django import forms
from django.utils import timezone

from fleet.forms.record import DayInput

MOST_HOURS = 10_000
MOST_RETROFITS = 200
DAYS = 91


class BacklogForm(forms.Form):
    target_on = DayInput(required=False, label="Under its target by")
    more_hours = forms.FloatField(
        required=False,
        min_value=-MOST_HOURS,
        max_value=MOST_HOURS,
        label="Hours a week more",
        widget=forms.NumberInput(attrs={"placeholder": "0", "step": "any"}),
        help_text="An extra shift of 8 is 8; −8 is one fewer.",
    )
    from_on = DayInput(required=False, label="From")
    until_on = DayInput(required=False, label="Until")
    retrofits_a_week = forms.FloatField(
        required=False,
        min_value=0,
        max_value=MOST_RETROFITS,
        label="Retrofits a week at the bench",
        widget=forms.NumberInput(attrs={"placeholder": "as planned", "step": "any"}),
        error_messages={
            "min_value": "Fewer than none cannot come. Write 0 or more.",
            "max_value": f"No bench takes that many. Write {MOST_RETROFITS} or fewer.",
        },
    )

    def clean_target_on(self) -> dt.date | None:
        day = self.cleaned_data["target_on"]
        ahead = 1 if day is None else (day - timezone.localdate()).days
        if ahead < 1:
            raise forms.ValidationError("This day has passed. Choose a day from tomorrow on.")
        if ahead > DAYS:
            raise forms.ValidationError(f"We look {DAYS} days ahead. Choose an earlier day.")
        return day

    def clean(self) -> dict[str, Any]:
        cleaned = super().clean() or self.cleaned_data
        begin, end = cleaned.get("from_on"), cleaned.get("until_on")
        if begin and end and end < begin:
            self.add_error("until_on", "The last day lies before the first. Exchange them.")
        if (begin or end) and not cleaned.get("more_hours") and "more_hours" not in self.errors:
            self.add_error("more_hours", "How many hours a week? Write the number, or clear the days.")
        return cleaned

    @property
    def in_use(self) -> bool:
        return any(self.data.get(name) for name in self.fields)
