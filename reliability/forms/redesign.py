"""What of a redesign's evidence is looked at: component, failure modes, other candidates, day."""

from __future__ import annotations

import datetime as dt
from typing import Any

from django import forms
from django.utils import timezone

from fleet.forms.record import DayInput
from fleet.models import Component, FailureMode, Part

RESTS_ON = [
    ("", "the verdict"),
    ("all-history", "all history"),
    ("hope", "the hope"),
]


class EvidenceForm(forms.Form):
    component = forms.ModelChoiceField(queryset=None, to_field_name="code", required=False, empty_label=None)
    mode = forms.ModelMultipleChoiceField(
        queryset=None, to_field_name="code", required=False, label="Only these failure modes"
    )
    also = forms.ModelMultipleChoiceField(
        queryset=None, to_field_name="code", required=False, label="Beside it, other candidates"
    )
    as_of = DayInput(required=False, label="Records up to")
    money = forms.ChoiceField(required=False, choices=RESTS_ON, label="Money counted with")

    def __init__(self, data: Any, *, request: Any, lines: list[Any]) -> None:
        super().__init__(data)
        self.lines = lines
        chosen = self.line_for(data.get("component", ""))
        components = [line.new_part.component_id for line in lines]
        self.fields["component"].queryset = request.seen(Component).filter(pk__in=components)
        self.fields["component"].label_from_instance = lambda component: component.title
        own = chosen.new_part.component_id if chosen else None
        self.fields["mode"].queryset = request.seen(FailureMode).filter(component=own)
        self.fields["mode"].label_from_instance = lambda mode: mode.title
        taken = [chosen.new_part_id, *(part.pk for part in chosen.replaces.all())] if chosen else []
        self.fields["also"].queryset = request.seen(Part).filter(component=own).exclude(pk__in=taken)
        self.fields["also"].label_from_instance = lambda part: part.title
        # another component has other modes and candidates: one goes there by its link, which loads the page anew
        self.fields["component"].widget = forms.HiddenInput()
        if len(lines) < 2:
            del self.fields["component"]
        for name in ("mode", "also"):
            self.fields[name].widget.attrs["size"] = 4

    def line_for(self, code: str) -> Any:
        """The line of the component in the address, else the first."""
        wanted = code.strip().upper()
        return next((line for line in self.lines if line.new_part.component.code == wanted), None) or (
            self.lines[0] if self.lines else None
        )

    def clean_as_of(self) -> dt.date | None:
        day = self.cleaned_data["as_of"]
        if day is not None and day > timezone.localdate():
            raise forms.ValidationError("This day has not come yet. Choose one up to today.")
        return day

    def line(self) -> Any:
        component = self.cleaned_data.get("component")
        return self.line_for(component.code if component else "")

    def as_of_day(self) -> dt.date:
        return self.cleaned_data.get("as_of") or timezone.localdate()

    def rests_on(self) -> str:
        """The comparison whose ratio the money is counted with; empty: the first that tells one."""
        return str(self.cleaned_data.get("money") or "").replace("-", " ")
