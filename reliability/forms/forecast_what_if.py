"""What a forecast may be asked to assume, in the words of the what-if panel; all of it stands in the address."""

from __future__ import annotations

from typing import Any

from django import forms
from django.utils import timezone

from fleet.forms.record import DayInput
from fleet.models import Component, Part
from reliability.forecasts.what_if import MOST_DUTY, UnusableWhatIf, WhatIf

LEAST_DUTY = LEAST_AGE = 0.01  # hardly used, changed at once: below, numbers only lose their meaning
LEAST_A_WEEK = 0.001
# What belongs to one component is not carried over to another.
OF_ONE_COMPONENT = ("replace_at", "superseding", "superseding_from", "retrofit_a_week")


class WhatIfForm(forms.Form):
    duty = forms.FloatField(
        required=False,
        label="Use of every module, times",
        widget=forms.NumberInput(attrs={"placeholder": "1", "step": "any"}),
        help_text="1.2 is a fifth more strokes or hours a day.",
    )
    replace_at = forms.FloatField(
        required=False, widget=forms.NumberInput(attrs={"placeholder": "never", "step": "any"})
    )
    superseding = forms.ModelChoiceField(
        queryset=None, to_field_name="code", required=False, empty_label="as now", label="What goes in"
    )
    superseding_from = DayInput(required=False, label="from")
    retrofit_a_week = forms.FloatField(
        required=False,
        label="Working ones changed a week",
        widget=forms.NumberInput(attrs={"placeholder": "none", "step": "any"}),
    )
    of = forms.CharField(required=False, widget=forms.HiddenInput)

    def __init__(self, data: Any, *, request: Any, component: Component, service_level: float) -> None:
        self.service_level = service_level
        given = data.copy()
        if given.get("of", component.code) != component.code:
            for name in OF_ONE_COMPONENT:
                given.pop(name, None)
        given["of"] = component.code
        super().__init__(given)
        self.fields["replace_at"].label = f"Replace as planned at, {component.clock}"
        self.fields["superseding"].queryset = request.seen(Part).filter(component=component)
        self.fields["superseding"].label_from_instance = lambda part: part.title
        self.fields["superseding"].error_messages["invalid_choice"] = f"This is no part for the {component.title}."

    def clean_duty(self) -> float:
        duty = self.cleaned_data["duty"]
        if duty is None:
            return 1.0
        if not LEAST_DUTY <= duty <= MOST_DUTY:
            raise forms.ValidationError(
                f"Times {duty:g} is no use. Write a factor from {LEAST_DUTY:g} to {MOST_DUTY:g}."
            )
        return float(duty)

    def clean_replace_at(self) -> float | None:
        age = self.cleaned_data["replace_at"]
        if age is not None and not LEAST_AGE <= age < 1e12:
            raise forms.ValidationError(f"{age:g} is no age. Write one from {LEAST_AGE:g} up.")
        return age

    def clean_retrofit_a_week(self) -> float | None:
        pace = self.cleaned_data["retrofit_a_week"]
        if pace is not None and not LEAST_A_WEEK <= pace < 1e7:
            raise forms.ValidationError(f"{pace:g} a week are none. Write {LEAST_A_WEEK:g} or more, or leave it empty.")
        return pace

    def clean(self) -> dict[str, Any]:
        cleaned = super().clean() or self.cleaned_data
        beside = [name for name in ("superseding_from", "retrofit_a_week") if cleaned.get(name) is not None]
        if beside and not cleaned.get("superseding") and "superseding" not in self.errors:
            self.add_error("superseding", "Say which part goes in, too.")
        if cleaned.get("superseding") and cleaned.get("superseding_from") is None:
            # the choice alone speaks of today on
            cleaned["superseding_from"] = timezone.localdate()
        return cleaned

    def what_if(self) -> WhatIf:
        """Raises UnusableWhatIf."""
        asked = self.cleaned_data
        part = asked["superseding"]
        return WhatIf(
            duty=asked["duty"],
            replace_at=asked["replace_at"],
            superseding=part.code if part else None,
            superseding_from=asked["superseding_from"] if part else None,
            retrofit_a_week=asked["retrofit_a_week"],
            service_level=self.service_level,
        )

    def refuse(self, error: Exception) -> None:
        """What the count itself cannot assume, on its field."""
        field = error.field if isinstance(error, UnusableWhatIf) else None
        self.add_error(field if field in self.fields else None, str(error))

    @property
    def in_use(self) -> bool:
        return any(self.data.get(name) for name in self.fields if name != "of")
