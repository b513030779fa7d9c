"""What planned replacement is asked: the design, both costs, the visits; in the address, and remembered on request."""

from __future__ import annotations

from decimal import Decimal
from typing import Any

from django import forms

from fleet.models import Component, Part

LEAST = Decimal("0.01")
COST: dict[str, Any] = {"min_value": LEAST, "max_digits": 10, "decimal_places": 2, "required": False}
NO_COST = "This is no cost. Write one above 0."


class ReplacementForm(forms.Form):
    part = forms.ModelChoiceField(queryset=None, to_field_name="code", required=False, empty_label="the usual one")
    planned_cost = forms.DecimalField(
        label="A planned replacement costs",
        help_text="The part, and the work at a visit that takes place anyway.",
        error_messages={"min_value": NO_COST},
        **COST,
    )
    failure_cost = forms.DecimalField(label="A failure costs", error_messages={"min_value": NO_COST}, **COST)
    visit_every_days = forms.IntegerField(
        label="Planned only at visits, every so many days",
        required=False,
        min_value=1,
        max_value=3650,
        widget=forms.NumberInput(attrs={"placeholder": "any day"}),
    )
    version = forms.IntegerField(required=False, widget=forms.HiddenInput, min_value=1)

    def __init__(self, *args: Any, request: Any, component: Component, currency: str, why: str, **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        self.fields["part"].queryset = request.seen(Part).filter(component=component)
        self.fields["part"].label_from_instance = lambda part: part.title
        self.fields["part"].error_messages["invalid_choice"] = f"This is no part for the {component.title}."
        self.fields["failure_cost"].help_text = why
        for name in ("planned_cost", "failure_cost"):
            self.fields[name].label += f", {currency}"
            self.fields[name].widget.attrs["step"] = "any"

    @property
    def costs(self) -> dict[str, Any]:
        """What is remembered."""
        return {name: self.cleaned_data[name] for name in ("planned_cost", "failure_cost", "visit_every_days")}

    def require_costs(self) -> bool:
        """Both costs are needed for an answer."""
        for name in ("planned_cost", "failure_cost"):
            if self.cleaned_data.get(name) is None and name not in self.errors:
                self.add_error(name, "Enter it: without both costs there is nothing to weigh.")
        return not self.errors
