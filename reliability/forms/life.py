"""What the Life screen can be asked; all of it stands in the address."""

from __future__ import annotations

from typing import Any

from django import forms

from fleet.forms.record import DayInput
from fleet.models import Clock, Component, FailureMode, LifeSet, Part, Site

GROUPINGS = [("part", "part"), ("site", "site"), ("type", "module type"), ("quarter", "quarter fitted"), ("lot", "lot")]


class LifeForm(forms.Form):
    component = forms.ModelChoiceField(queryset=None, to_field_name="code", empty_label=None)
    clock = forms.ChoiceField(choices=[("", "its own"), *Clock.choices], required=False, label="Counted in")
    by = forms.ChoiceField(choices=[*GROUPINGS, ("all", "all together")], required=False, label="Grouped by")
    site = forms.ModelMultipleChoiceField(queryset=None, to_field_name="code", required=False, label="Sites")
    part = forms.ModelMultipleChoiceField(queryset=None, to_field_name="code", required=False, label="Parts")
    mode = forms.ModelMultipleChoiceField(
        queryset=None, to_field_name="code", required=False, label="If only these modes acted"
    )
    set = forms.ModelChoiceField(
        queryset=None, to_field_name="code", required=False, empty_label="the records", label="Lives from"
    )
    as_of = DayInput(required=False, label="As of")
    confidence = forms.FloatField(required=False, min_value=0.5, max_value=0.999, label="Sure to")
    rigs = forms.BooleanField(required=False, label="Count test stands too")
    worn = forms.ChoiceField(
        choices=[("", "failures"), ("withdrawn", "withdrawn")], required=False, label="Worn to limit counts as"
    )

    def __init__(self, *args: Any, request: Any, component: Component | None, **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        self.fields["component"].queryset = request.seen(Component)
        self.fields["component"].label_from_instance = lambda each: each.title
        self.fields["site"].queryset = request.seen(Site)
        self.fields["site"].label_from_instance = lambda each: each.title
        of_component = {"component": component} if component else {}
        self.fields["part"].queryset = request.seen(Part).filter(**of_component)
        self.fields["mode"].queryset = request.seen(FailureMode).filter(**of_component)
        sets = request.seen(LifeSet).filter(**({"lives__component": component} if component else {})).distinct()
        self.fields["set"].queryset = sets
        if not sets.exists():
            del self.fields["set"]

    def question(self) -> dict[str, Any]:
        """The choices as arguments of `life_answer`."""
        asked = self.cleaned_data
        by = asked.get("by") or "part"
        return {
            "clock": asked.get("clock") or None,
            "by": None if by == "all" else by,
            "sites": [each.code for each in asked["site"]] or None,
            "parts": [each.code for each in asked["part"]] or None,
            "modes": [each.code for each in asked["mode"]] or None,
            "life_set": asked["set"].code if asked.get("set") else None,
            "as_of": asked.get("as_of"),
            "confidence": asked.get("confidence") or 0.95,
            "with_rigs": asked["rigs"],
            "worn_is_failure": asked.get("worn") != "withdrawn",
        }
