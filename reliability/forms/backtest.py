"""Which component's past forecasts are looked at, and over how many quarters they are judged."""

from __future__ import annotations

from typing import Any

from django import forms

from fleet.models import Component
from reliability.forecasts.backtest_works import MOST_QUARTERS, QUARTERS

MEASURES = [("failures", "failures"), ("parts_used", "parts used")]


class BacktestForm(forms.Form):
    component = forms.ModelChoiceField(queryset=None, to_field_name="code", required=False, empty_label=None)
    measure = forms.ChoiceField(label="Counting", choices=MEASURES, required=False)

    def __init__(self, *args: Any, request: Any, **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        self.fields["component"].queryset = request.seen(Component)
        self.fields["component"].label_from_instance = lambda each: each.title

    def clean_measure(self) -> str:
        return self.cleaned_data["measure"] or MEASURES[0][0]


class QuartersForm(forms.Form):
    quarters = forms.IntegerField(
        label="Quarters",
        initial=QUARTERS,
        min_value=1,
        max_value=MOST_QUARTERS,
        error_messages={
            "invalid": f"This is no number of quarters. Write 1 to {MOST_QUARTERS}.",
            "required": f"Say over how many quarters, 1 to {MOST_QUARTERS}.",
            "min_value": f"Write 1 to {MOST_QUARTERS} quarters.",
            "max_value": f"Write 1 to {MOST_QUARTERS} quarters.",
        },
    )
