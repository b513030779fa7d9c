"""What can be asked about where to keep spares; all of it stands in the address."""

from __future__ import annotations

from django import forms

BUDGET, SHIP_DAYS = 5000.0, 1.0


class PlacesForm(forms.Form):
    budget = forms.FloatField(
        required=False,
        min_value=0,
        max_value=10_000_000,
        label="Money for spares",
        widget=forms.NumberInput(attrs={"placeholder": f"{BUDGET:.0f}", "step": "any"}),
    )
    ship = forms.FloatField(
        required=False,
        min_value=0,
        max_value=365,
        label="Days from the depot to a site",
        widget=forms.NumberInput(attrs={"placeholder": f"{SHIP_DAYS:.0f}", "step": "any"}),
    )
    everywhere = forms.BooleanField(required=False, label="Every site may keep spares, also those without a store")

    def asked(self) -> tuple[float, float, bool]:
        said = self.cleaned_data
        budget, ship = said["budget"], said["ship"]
        return (
            BUDGET if budget is None else budget,
            SHIP_DAYS if ship is None else ship,
            bool(said["everywhere"]),
        )
