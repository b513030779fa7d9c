"""A store, and what is moved in and out of it."""

from __future__ import annotations

import uuid
from typing import Any, ClassVar

from django import forms

from fleet.forms.choosing import PickField
from fleet.forms.log import EntryKeyField
from fleet.forms.record import CodeInput, DayInput, RecordForm
from fleet.models import BenchJob, Condition, Part, Person, Site, StockBalance, StockMove, Store, Visit
from fleet.models.supply import MOST_PIECES

RECENT_VISITS = 40
CONDITIONS = [(Condition.NEW.value, "new"), (Condition.USED.value, "used")]


class StoreForm(RecordForm):
    noun = "store"
    code = CodeInput(label="Code")
    name = forms.CharField(max_length=120, required=False)
    site = forms.ModelChoiceField(
        queryset=None, to_field_name="code", required=False, empty_label="no site", help_text="Empty for a van."
    )
    person = forms.ModelChoiceField(
        queryset=None, to_field_name="code", required=False, empty_label="nobody", label="Carried by"
    )
    may_go_below_zero = forms.BooleanField(
        required=False, label="May go below zero", help_text="Parts leave it even where the book knows of none."
    )

    def prepare(self) -> None:
        self.fields["site"].queryset = self.request.seen(Site)
        self.fields["person"].queryset = self.request.seen(Person).filter(is_active=True)
        self.fields["person"].label_from_instance = lambda person: f"{person.name} ({person.code})"
        self.fields["site"].label_from_instance = lambda site: f"{site.title} ({site.code})"

    def opened(self, record: Any) -> dict[str, Any]:
        return super().opened(record) | {
            "site": record.site.code if record.site else None,
            "person": record.person.code if record.person else None,
        }

    def action(self) -> Any:
        from fleet.actions.save_store import save_store

        return save_store


class MoveForm(forms.Form):
    """`fields_to_send` are the action's arguments besides the store and the person."""

    title: ClassVar[str] = ""
    submit: ClassVar[str] = ""
    done: ClassVar[str] = ""

    entry_key = EntryKeyField()
    part = forms.ModelChoiceField(queryset=None, to_field_name="code", empty_label="choose one")
    quantity = forms.IntegerField(min_value=1, max_value=MOST_PIECES, label="How many")
    condition = forms.ChoiceField(choices=CONDITIONS, required=False, initial=Condition.NEW.value)
    happened_on = DayInput(required=False, label="Day", help_text="Empty: today.")
    reason = forms.CharField(max_length=500, required=False, label="Reason or note")

    def __init__(self, *args: Any, store: Store, request: Any, **kwargs: Any) -> None:
        self.store, self.request = store, request
        super().__init__(*args, **kwargs)
        self.fields["entry_key"].initial = uuid.uuid4()
        self.fields["quantity"].widget.attrs["inputmode"] = "numeric"
        part: Any = self.fields["part"]
        part.queryset = self.parts()
        part.error_messages["invalid_choice"] = "No part has this number. Choose one of the list."
        here = dict(self.here())
        part.label_from_instance = lambda each: with_number(each, here.get(each.pk))
        self.prepare()

    def parts(self) -> Any:
        return self.request.seen(Part).order_by("code_order")

    def here(self) -> list[tuple[int, int]]:
        """New ones on the shelf, told beside each part."""
        rows = self.request.seen(StockBalance).filter(store=self.store, condition=Condition.NEW)
        return list(rows.values_list("part_id", "on_hand"))

    def prepare(self) -> None:
        """Choices that depend on store and person."""

    def clean_condition(self) -> str:
        return self.cleaned_data["condition"] or Condition.NEW.value

    def sent(self) -> dict[str, Any]:
        return dict(self.cleaned_data)

    def action(self) -> Any:
        raise NotImplementedError

    def save_by(self, person: Any) -> StockMove:
        return self.action()(by=person, store=self.store, **self.sent())


def with_number(part: Part, on_hand: int | None) -> str:
    return f"{part.title}: {on_hand} here" if on_hand else part.title


class ReceiveForm(MoveForm):
    title, submit, done = "Receive parts", "Put them on the shelf", "received at"
    field_order = ["part", "quantity", "condition", "happened_on", "reason"]

    def prepare(self) -> None:
        self.fields["reason"].label = "Where they come from"
        self.fields["reason"].help_text = "A delivery of an order is received on the order’s page."

    def action(self) -> Any:
        from fleet.actions.receive_stock import receive_stock

        return receive_stock


class IssueForm(MoveForm):
    title, submit, done = "Issue parts", "Take them off the shelf", "issued from"
    field_order = ["part", "quantity", "condition", "visit", "job", "reason", "happened_on"]

    def prepare(self) -> None:
        visits = self.request.seen(Visit).standing().select_related("module")
        own = visits.filter(entered_by=self.request.user) if self.request.user.role == "crew" else visits
        recent = own.order_by("-happened_at")[:RECENT_VISITS]
        words = [(visit, f"{visit.module.code}, {visit.happened_on:%Y-%m-%d}") for visit in recent]
        self.fields["visit"] = PickField(words, nothing="no visit", required=False, label="For the visit at")
        jobs = self.request.seen(BenchJob).open().select_related("module")
        told = [(job, f"{job.module.code} on the bench since {job.received_on:%Y-%m-%d}") for job in jobs]
        self.fields["job"] = PickField(told, nothing="no job", required=False, label="For the bench job")
        self.fields["reason"].label = "What for, if neither"
        self.fields["happened_on"].help_text = "Empty: the day of the visit, else today."
        if self.request.user.role == "crew":
            del self.fields["job"]
        self.order_fields(self.field_order)

    def action(self) -> Any:
        from fleet.actions.issue_part import issue_part

        return issue_part


class TransferForm(MoveForm):
    title, submit, done = "Transfer parts", "Hand them over", "handed over from"
    field_order = ["other_store", "part", "quantity", "condition", "happened_on", "reason"]

    def prepare(self) -> None:
        others = self.request.seen(Store).exclude(pk=self.store.pk)
        words = [(store, store.title) for store in others.order_by("code_order")]
        self.fields["other_store"] = PickField(words, nothing="choose one", label="To which store")
        self.order_fields(self.field_order)

    def action(self) -> Any:
        from fleet.actions.transfer_stock import transfer_stock

        return transfer_stock


class ScrapForm(MoveForm):
    title, submit, done = "Scrap parts", "Throw them away", "scrapped at"
    field_order = ["part", "quantity", "condition", "reason", "happened_on"]

    def prepare(self) -> None:
        self.fields["reason"].label = "Why they are thrown away"
        self.fields["reason"].required = True

    def action(self) -> Any:
        from fleet.actions.scrap_stock import scrap_stock

        return scrap_stock


class CountForm(MoveForm):
    """`expected` is what the book said when the form was opened; where it moved meanwhile, somebody counts again."""

    title, submit, done = "Count a part", "Keep the count", "counted at"
    expected = forms.IntegerField(required=False, widget=forms.HiddenInput)
    expected_of = forms.CharField(required=False, widget=forms.HiddenInput)  # the part and condition it was said of
    counted = forms.IntegerField(min_value=0, max_value=MOST_PIECES, label="Lie on the shelf")
    field_order = ["part", "condition", "counted", "reason"]

    def prepare(self) -> None:
        del self.fields["quantity"], self.fields["happened_on"]
        self.fields["counted"].widget.attrs["inputmode"] = "numeric"
        self.fields["reason"].label = "Where a difference comes from"
        self.fields["reason"].help_text = "Needed only if the number differs from the book."

    def action(self) -> Any:
        from fleet.actions.count_stock import count_stock

        return count_stock

    def sent(self) -> dict[str, Any]:
        sent = super().sent()
        if sent.pop("expected_of") != f"{sent['part'].code} {sent['condition']}":
            sent["expected"] = None
        return sent

    def note_moved(self, on_hand: int) -> None:
        """The next sending is held to what the book says now."""
        self.data = self.data.copy()
        self.data["expected"] = str(on_hand)
        self.data["entry_key"] = str(uuid.uuid4())
