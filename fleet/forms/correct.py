"""Forms that correct one entered record; each keeps why it was corrected."""

from __future__ import annotations

import datetime as dt
from typing import Any, ClassVar

from django import forms

from fleet.forms.record import CodeInput, DayInput, InstantInput, VersionField
from fleet.models import (
    FailureMode,
    Fitting,
    FoundBy,
    FoundKind,
    Left,
    Outcome,
    Part,
    Person,
    Position,
    RemovalReason,
    Site,
)
from fleet.models.zones import zone


class CorrectForm(forms.Form):
    """`changed` gives only what differs from the record."""

    names: ClassVar[tuple[str, ...]] = ()
    version = VersionField()
    reason = forms.CharField(max_length=500, label="Why it is corrected", help_text="Kept with the change.")

    def __init__(self, *args: Any, record: Any, request: Any, **kwargs: Any) -> None:
        self.record, self.request = record, request
        self.zone = zone_of(record)
        initial = {"version": record.version} | {name: getattr(record, name) for name in self.names}
        super().__init__(*args, initial=initial | self.opened(), **kwargs)
        self.prepare()
        self.order_fields([*self.names, "reason"])

    def opened(self) -> dict[str, Any]:
        return {}

    def prepare(self) -> None:
        """Choices and zones that depend on the record."""

    def changed(self) -> dict[str, Any]:
        return {
            name: self.cleaned_data[name]
            for name in self.names
            if same(self.cleaned_data[name]) != same(getattr(self.record, name))
        }


def zone_of(record: Any) -> Any:
    site = getattr(record, "site", None) or getattr(getattr(record, "visit", None), "site", None)
    if site is None:
        from fleet.models import Book

        return zone(Book.load().zone)
    return site.tz


def same(value: Any) -> Any:
    """Instants are typed by the minute: seconds alone are no change."""
    return value.replace(second=0, microsecond=0) if isinstance(value, dt.datetime) else value


class CorrectVisit(CorrectForm):
    names = ("happened_at", "crew", "left", "known_on", "note")
    crew = CodeInput(required=False, label="Crew (code)", help_text="")
    left = forms.ChoiceField(choices=[("", "not known"), *Left.choices], required=False, label="Left the module")
    known_on = DayInput(label="Known since")
    note = forms.CharField(max_length=4000, required=False, widget=forms.Textarea(attrs={"rows": 3}))

    def prepare(self) -> None:
        self.fields["happened_at"] = InstantInput(zone=self.zone, label="When")

    def opened(self) -> dict[str, Any]:
        return {"crew": self.record.crew.code if self.record.crew else ""}

    def clean_crew(self) -> Person | None:
        code = self.cleaned_data["crew"]
        if not code:
            return None
        person = self.request.seen(Person).filter(code=code).first()
        if person is None:
            raise forms.ValidationError(f"There is no person {code}. Use the code they sign in with.")
        return person


class CorrectFitting(CorrectForm):
    names = (
        "part",
        "serial",
        "lot",
        "fitted_on",
        "age_at_fit",
        "removed_on",
        "reason",
        "mode",
        "failed_on",
        "last_good_on",
        "found_by",
        "caused_by",
        "note",
    )
    part = forms.ModelChoiceField(queryset=None, to_field_name="code", empty_label="choose one")
    serial = forms.CharField(max_length=60, required=False)
    lot = forms.CharField(max_length=60, required=False)
    fitted_on = DayInput(required=False, help_text="Empty: fitted before anybody wrote it down.")
    age_at_fit = forms.FloatField(min_value=0, max_value=1e13, label="Age when fitted")
    removed_on = DayInput(required=False)
    mode = forms.ModelChoiceField(queryset=None, to_field_name="code", required=False, empty_label="none")
    failed_on = DayInput(required=False)
    last_good_on = DayInput(required=False, label="Last seen working on")
    found_by = forms.ChoiceField(choices=[("", "not known"), *FoundBy.choices], required=False)
    caused_by = CodeInput(
        required=False, label="Caused by fitting", help_text="The code of the fitting that caused it."
    )
    note = forms.CharField(max_length=4000, required=False, widget=forms.Textarea(attrs={"rows": 3}))

    def __init__(self, *args: Any, **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        # The record's own “reason” is shown as why it came out; the form's “reason” is why it is corrected.
        self.order_fields([*("removal" if name == "reason" else name for name in self.names), "reason"])

    def prepare(self) -> None:
        component = self.record.position.component_id
        self.fields["part"].queryset = self.request.seen(Part).filter(component=component)
        self.fields["mode"].queryset = self.request.seen(FailureMode).filter(component=component)
        choices = [("", "still fitted"), *RemovalReason.choices]
        self.fields["removal"] = forms.ChoiceField(choices=choices, required=False, label="Why it came out")
        self.initial |= {"removal": self.record.reason, "reason": ""}

    def opened(self) -> dict[str, Any]:
        record = self.record
        return {
            "part": record.part.code,
            "mode": record.mode.code if record.mode else None,
            "caused_by": record.caused_by.code if record.caused_by else "",
        }

    def clean_caused_by(self) -> Fitting | None:
        code = self.cleaned_data["caused_by"]
        if not code:
            return None
        cause = self.request.seen(Fitting).filter(code=code, module=self.record.module_id).first()
        if cause is None:
            raise forms.ValidationError(f"This module has no fitting {code}. Use a code from its fittings.")
        return cause

    def changed(self) -> dict[str, Any]:
        found = {
            name: self.cleaned_data[name]
            for name in self.names
            if name != "reason" and same(self.cleaned_data[name]) != same(getattr(self.record, name))
        }
        removal = self.cleaned_data["removal"]
        return found | ({"reason": removal} if removal != self.record.reason else {})


class CorrectFinding(CorrectForm):
    names = ("finding", "mode", "note")
    finding = forms.ChoiceField(choices=FoundKind.choices)
    mode = forms.ModelChoiceField(queryset=None, to_field_name="code", required=False, empty_label="none")
    note = forms.CharField(max_length=4000, required=False, widget=forms.Textarea(attrs={"rows": 3}))

    def prepare(self) -> None:
        position: Position = self.record.position
        self.fields["mode"].queryset = self.request.seen(FailureMode).filter(component=position.component_id)

    def opened(self) -> dict[str, Any]:
        return {"mode": self.record.mode.code if self.record.mode else None}


class CorrectStop(CorrectForm):
    names = ("stopped_at", "running_at", "note")
    note = forms.CharField(max_length=4000, required=False, widget=forms.Textarea(attrs={"rows": 3}))

    def prepare(self) -> None:
        self.fields["stopped_at"] = InstantInput(zone=self.zone, label="Stopped since")
        self.fields["running_at"] = InstantInput(zone=self.zone, label="Running again since", required=False)


class CorrectPlacement(CorrectForm):
    names = ("site", "bay", "from_on", "to_on")
    site = forms.ModelChoiceField(queryset=None, to_field_name="code", empty_label="choose one")
    bay = forms.CharField(max_length=40, required=False)
    from_on = DayInput(label="From")
    to_on = DayInput(required=False, label="Until", help_text="Empty: it stands there now.")

    def prepare(self) -> None:
        self.fields["site"].queryset = self.request.seen(Site)

    def opened(self) -> dict[str, Any]:
        return {"site": self.record.site.code}


class CorrectJob(CorrectForm):
    """The record's own “reason” is why it came; the form's is why it is corrected."""

    names = ("received_on", "started_on", "finished_on", "outcome", "note")
    received_on = DayInput(label="Came on")
    started_on = DayInput(required=False, label="Work began on")
    finished_on = DayInput(required=False, label="Finished on", help_text="Empty: the job is open.")
    outcome = forms.ChoiceField(choices=[("", "open"), *Outcome.choices], required=False)
    note = forms.CharField(max_length=4000, required=False, widget=forms.Textarea(attrs={"rows": 3}))


class CorrectHours(CorrectForm):
    names = ("day", "hours")
    day = DayInput()
    hours = forms.FloatField(min_value=0, max_value=24)


CORRECT_FORMS: dict[str, type[CorrectForm]] = {
    "visit": CorrectVisit,
    "fitting": CorrectFitting,
    "finding": CorrectFinding,
    "stop": CorrectStop,
    "placement": CorrectPlacement,
    "job": CorrectJob,
    "hours": CorrectHours,
}


class StrikeOutForm(forms.Form):
    version = VersionField()
    reason = forms.CharField(
        max_length=480, label="Why it is struck out", help_text="It stays readable and leaves every statistic."
    )
    with_all = forms.BooleanField(required=False, label="Strike out all that was entered with this visit too")

    def __init__(self, *args: Any, record: Any, **kwargs: Any) -> None:
        super().__init__(*args, initial={"version": getattr(record, "version", None)}, **kwargs)
        self.fields["version"].required = hasattr(record, "version")  # a reading has none: it is never edited
        if record._meta.model_name != "visit":
            del self.fields["with_all"]


class LooksWrongForm(forms.Form):
    word = forms.CharField(max_length=500, label="What looks wrong, in a few words")


class SettleForm(forms.Form):
    outcome = forms.ChoiceField(
        choices=[("corrected", "It was wrong, and is corrected now"), ("confirmed", "It is right as it stands")],
        widget=forms.RadioSelect,
        label="What came of it",
    )
    answer = forms.CharField(max_length=500, required=False, label="A word back", help_text="Kept with the mark.")
