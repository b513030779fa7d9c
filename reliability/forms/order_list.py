"""What the order list can be narrowed by and asked to assume, and what is ticked on it."""

from __future__ import annotations

import datetime as dt
import uuid
from collections.abc import Iterable
from typing import Any

from django import forms
from django.utils import timezone

from fleet.forms.log import EntryKeyField
from fleet.forms.record import DayInput
from fleet.forms.supply import NewestField
from fleet.models import Book, Component, Part, SupplyLine
from fleet.models.supply import MOST_PIECES

SHOWS = [("", "all"), ("order", "to order"), ("out", "may run out before the next delivery"), ("old", "superseded")]
FURTHEST = 366


class OrderListForm(forms.Form):
    q = forms.CharField(required=False, max_length=60, label="Number or name")
    component = forms.ModelChoiceField(queryset=None, to_field_name="code", required=False, empty_label="all")
    supplier = forms.CharField(required=False, max_length=120, label="Supplier")
    shows = forms.ChoiceField(choices=SHOWS, required=False, label="Which")

    def __init__(self, *args: Any, request: Any, **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        self.fields["component"].queryset = request.seen(Component)
        self.fields["component"].label_from_instance = lambda each: each.title
        self.fields["component"].error_messages["invalid_choice"] = "There is no such component in this book."
        self.fields["shows"].error_messages["invalid_choice"] = "This is not among the choices. Choose one of the list."


class OrderWhatIfForm(forms.Form):
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
    superseding = forms.ModelChoiceField(
        queryset=None, to_field_name="code", required=False, empty_label="as planned", label="What goes in"
    )
    superseding_from = DayInput(required=False, label="from")
    retrofit_a_week = forms.FloatField(
        required=False,
        label="Working ones changed a week",
        widget=forms.NumberInput(attrs={"placeholder": "none", "step": "any"}),
    )

    def __init__(self, *args: Any, request: Any, **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        self.usual_service = 100 * Book.load().service_level
        self.fields["service"].widget.attrs |= {"placeholder": f"{self.usual_service:g}", "step": "any"}
        self.fields["superseding"].queryset = request.seen(Part).exclude(state="ended").order_by("code_order")
        self.fields["superseding"].label_from_instance = lambda part: part.title
        self.fields["superseding"].error_messages["invalid_choice"] = "No part in force has this number."

    def clean_superseding_from(self) -> dt.date | None:
        begin = self.cleaned_data["superseding_from"]
        if begin is not None and (begin - timezone.localdate()).days > FURTHEST:
            raise forms.ValidationError("This is more than a year ahead. Choose an earlier day.")
        return begin

    def clean_retrofit_a_week(self) -> float | None:
        pace = self.cleaned_data["retrofit_a_week"]
        if pace is not None and not 0.001 <= pace < 1e6:
            raise forms.ValidationError(f"{pace:g} a week are none. Write 0.001 or more, or leave it empty.")
        return pace

    def clean(self) -> dict[str, Any]:
        cleaned = super().clean() or self.cleaned_data
        beside = cleaned.get("superseding_from") is not None or cleaned.get("retrofit_a_week") is not None
        if beside and not cleaned.get("superseding") and "superseding" not in self.errors:
            self.add_error("superseding", "Say which part goes in, too.")
        return cleaned

    @property
    def in_use(self) -> bool:
        return any(self.data.get(name) for name in self.fields)

    def service_level(self) -> float | None:
        asked = self.cleaned_data.get("service")
        return None if asked is None else float(f"{asked / 100:.6g}")


class TickedForm(forms.Form):
    """A tick and a quantity for each part on the list; the lines that are ticked become one supply order."""

    entry_key = EntryKeyField()
    newest = NewestField()

    def __init__(self, data: Any, *, parts: Iterable[Any], quantities: dict[str, int], request: Any) -> None:
        super().__init__(data)
        self.fields["entry_key"].initial = uuid.uuid4()
        self.fields["newest"].initial = request.seen(SupplyLine).newest()
        self.parts = {part.code: part for part in parts}
        for code in self.parts:
            wanted = quantities.get(code, 0)
            tick = forms.BooleanField(required=False, initial=wanted > 0, label=f"Order {code}")
            tick.widget.attrs["form"] = "order"
            count = forms.IntegerField(
                required=False,
                min_value=1,
                max_value=MOST_PIECES,
                initial=wanted or None,
                label=f"How many of {code}",
                error_messages={
                    "invalid": "This is no whole number of pieces.",
                    "min_value": "Write 1 or more, or take the tick away.",
                    "max_value": f"More than {MOST_PIECES:,} pieces are no order.".replace(",", " "),
                },
            )
            count.widget.attrs |= {"form": "order", "inputmode": "numeric", "class": "pieces"}
            self.fields[f"tick_{code}"] = tick
            self.fields[f"pieces_{code}"] = count

    def clean(self) -> dict[str, Any]:
        cleaned = super().clean() or self.cleaned_data
        ticked = [code for code in self.parts if cleaned.get(f"tick_{code}")]
        for code in list(self.errors):
            # what is not ticked is not ordered, whatever stands there
            name = code.removeprefix("pieces_")
            if code.startswith("pieces_") and name not in ticked:
                del self._errors[code]  # type: ignore[attr-defined]
        for code in ticked:
            if cleaned.get(f"pieces_{code}") is None and f"pieces_{code}" not in self.errors:
                self.add_error(f"pieces_{code}", "How many? Write the number, or take the tick away.")
        if not ticked:
            self.add_error(None, "No line is ticked, so there is nothing to order. Tick at least one.")
        return cleaned

    def ordered(self) -> list[tuple[Any, int]]:
        said = self.cleaned_data
        return [(part, said[f"pieces_{code}"]) for code, part in self.parts.items() if said.get(f"tick_{code}")]

    def cells(self, code: str) -> dict[str, Any]:
        return {"tick": self[f"tick_{code}"], "pieces": self[f"pieces_{code}"]} if code in self.parts else {}
