"""Supply orders: placing one, receiving a delivery, changing or calling off a line."""

from __future__ import annotations

import uuid
from collections.abc import Sequence
from typing import Any

from django import forms

from fleet.actions.place_supply_order import OrderedPart
from fleet.forms.choosing import PickField
from fleet.forms.log import EntryKeyField
from fleet.forms.record import LOST_VERSION, CodeInput, DayInput, VersionField
from fleet.models import Part, Store, SupplyLine
from fleet.models.supply import MOST_PIECES

BLANK_LINES = 6
MOST_LINES = 60


class NewestField(forms.IntegerField):
    """The order line entered last when the page was opened: what comes after it, its reader has not seen."""

    widget = forms.HiddenInput

    def __init__(self) -> None:
        super().__init__(required=False, min_value=0, max_value=2**62)
        self.error_messages = dict.fromkeys(self.error_messages, LOST_VERSION)


class OrderForm(forms.Form):
    """What holds for the whole order."""

    entry_key = EntryKeyField()
    newest = NewestField()
    supplier = forms.CharField(max_length=120, required=False, help_text="Empty: that of the first part.")
    code = CodeInput(label="Order number", required=False, help_text="The supplier’s, or empty for one of the book.")
    ordered_on = DayInput(required=False, label="Ordered on", help_text="Empty: today.")

    def __init__(self, *args: Any, newest: int | None = None, **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        self.fields["entry_key"].initial = uuid.uuid4()
        self.fields["newest"].initial = newest


class OrderLineForm(forms.Form):
    """One line; a line without a part is passed over."""

    part = forms.ModelChoiceField(
        queryset=None, to_field_name="code", required=False, empty_label="–",
        error_messages={"invalid_choice": "No part has this number. Choose one of the list."},
    )  # fmt: skip
    quantity = forms.IntegerField(min_value=1, max_value=MOST_PIECES, required=False, label="How many")
    due_on = DayInput(required=False, label="Due on")
    unit_cost = forms.DecimalField(min_value=0, max_digits=10, decimal_places=2, required=False, label="Unit cost")

    def __init__(self, *args: Any, parts: Any, **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        part: Any = self.fields["part"]
        part.queryset = parts
        part.label_from_instance = with_pack
        self.fields["quantity"].widget.attrs["inputmode"] = "numeric"

    def clean(self) -> dict[str, Any]:
        cleaned = super().clean() or self.cleaned_data
        if cleaned.get("part") and cleaned.get("quantity") is None and "quantity" not in self.errors:
            self.add_error("quantity", "How many? Enter the number.")
        if not cleaned.get("part") and cleaned.get("quantity") is not None and "part" not in self.errors:
            self.add_error("part", "Which part? Choose it, or clear the number.")
        return cleaned


def with_pack(part: Part) -> str:
    return f"{part.title}, in packs of {part.pack}" if part.pack > 1 else part.title


class OrderSheet:
    """The order's form and a form a line, checked together."""

    def __init__(
        self, parts: Any, data: Any = None, asked: Sequence[tuple[str, str]] = (), newest: int | None = None
    ) -> None:
        self.order = OrderForm(data, newest=newest)
        count = self.lines_sent(data) if data is not None else min(MOST_LINES, len(asked) + BLANK_LINES)
        self.lines = [
            OrderLineForm(
                data, prefix=f"line-{place}", parts=parts,
                initial={"part": asked[place][0], "quantity": asked[place][1]} if place < len(asked) else {},
            )
            for place in range(count)
        ]  # fmt: skip
        self.count = count

    @staticmethod
    def lines_sent(data: Any) -> int:
        sent = str(data.get("lines", ""))
        return min(MOST_LINES, int(sent)) if sent.isascii() and sent.isdigit() and len(sent) < 4 else BLANK_LINES

    def is_valid(self) -> bool:
        return all([self.order.is_valid(), *[line.is_valid() for line in self.lines]])

    def filled(self) -> list[OrderLineForm]:
        return [line for line in self.lines if line.cleaned_data.get("part")]

    def ordered(self) -> dict[str, Any]:
        """The arguments of `place_supply_order`."""
        said = self.order.cleaned_data
        lines = [
            OrderedPart(
                part=line.cleaned_data["part"],
                quantity=line.cleaned_data["quantity"],
                due_on=line.cleaned_data["due_on"],
                unit_cost=line.cleaned_data["unit_cost"],
            )
            for line in self.filled()
        ]
        supplier = said["supplier"] or (lines[0].part.supplier if lines else "")
        return {
            "lines": lines,
            "supplier": supplier,
            "ordered_on": said["ordered_on"],
            "code": said["code"] or None,
            "entry_key": said["entry_key"],
            "newest": said["newest"],
        }


class DeliveryForm(forms.Form):
    """What came of each line that is still open; a line left empty got nothing."""

    entry_key = EntryKeyField()
    happened_on = DayInput(required=False, label="Came on", help_text="Empty: today.")
    reason = forms.CharField(max_length=500, required=False, label="Note")

    def __init__(self, *args: Any, lines: Sequence[Any], stores: Any, **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        self.order_lines = list(lines)
        self.fields["entry_key"].initial = uuid.uuid4()
        words = [(store, store.title) for store in stores]
        self.fields["store"] = PickField(words, label="Into which store", initial=words[0][0] if words else None)
        for line in self.order_lines:
            field = forms.IntegerField(
                min_value=0, max_value=MOST_PIECES, required=False, label=f"{line.part.title}: {line.due} to come"
            )
            field.widget.attrs["inputmode"] = "numeric"
            self.fields[f"line_{line.pk}"] = field
        self.order_fields(["store", *[f"line_{line.pk}" for line in self.order_lines], "happened_on", "reason"])

    def quantities(self) -> dict[SupplyLine, int]:
        came = {line: self.cleaned_data[f"line_{line.pk}"] for line in self.order_lines}
        return {line: count for line, count in came.items() if count}

    def sent(self) -> dict[str, Any]:
        said = self.cleaned_data
        store: Store = said["store"]
        return {"store": store, "quantities": self.quantities(), "happened_on": said["happened_on"],
                "reason": said["reason"], "entry_key": said["entry_key"]}  # fmt: skip


class LineForm(forms.Form):
    version = VersionField()
    quantity = forms.IntegerField(min_value=1, max_value=MOST_PIECES, label="Ordered")
    due_on = DayInput(required=False, label="Due on")
    unit_cost = forms.DecimalField(min_value=0, max_digits=10, decimal_places=2, required=False, label="Unit cost")
    reason = forms.CharField(max_length=500, required=False, label="Why", help_text="Kept with the change.")


class CallOffForm(forms.Form):
    version = VersionField()
    reason = forms.CharField(max_length=500, label="Why nothing more comes", help_text="Kept with the change.")
