"""A module's form, and its placing at a site."""

from __future__ import annotations

from typing import Any

from django import forms
from django.utils import timezone

from fleet.forms.record import CodeInput, DayInput, RecordForm
from fleet.models import Module, ModuleType, Site


class ModuleForm(RecordForm):
    noun = "module"
    code = CodeInput(label="Tag")
    type = forms.ModelChoiceField(queryset=None, to_field_name="code", empty_label="choose one")
    built_on = DayInput(required=False, label="Built on")
    records_from = DayInput(
        required=False,
        label="Removals written down since",
        help_text="Only where parts had been changed before anybody kept records.",
    )
    scrapped_on = DayInput(required=False, label="Scrapped on")

    def prepare(self) -> None:
        self.fields["type"].queryset = self.request.seen(ModuleType)

    def opened(self, record: Any) -> dict[str, Any]:
        return super().opened(record) | {"type": record.type.code}

    def action(self) -> Any:
        from fleet.actions.save_module import save_module

        return save_module


class PlaceForm(RecordForm):
    """A module comes to a site; the stay before ends that day."""

    version = None
    module = CodeInput(label="Module tag")
    site = forms.ModelChoiceField(queryset=None, to_field_name="code", empty_label="choose one")
    bay = forms.CharField(max_length=40, required=False, help_text="Where on the site.")
    from_on = DayInput(label="From")
    same_day = forms.BooleanField(required=False, label="It moved twice on that day")

    def prepare(self) -> None:
        self.fields["site"].queryset = self.request.seen(Site)
        self.fields["from_on"].initial = timezone.localdate()

    def clean_module(self) -> Module:
        tag = self.cleaned_data["module"]
        module = self.request.seen(Module).filter(code=tag).first()
        if module is None:
            raise forms.ValidationError(f"There is no module {tag} for you. Check the tag on its label.")
        return module

    def save_by(self, person: Any) -> Any:
        from fleet.actions.place_module import place_module

        return place_module(by=person, **self.cleaned_data)


class TakeAwayForm(RecordForm):
    """A module leaves its site without going to another."""

    version = None
    to_on = DayInput(label="Last day there")

    def prepare(self) -> None:
        self.fields["to_on"].initial = timezone.localdate()

    def save_by(self, person: Any) -> Any:
        from fleet.actions.take_away_module import take_away_module

        take_away_module(by=person, module=self.record, to_on=self.cleaned_data["to_on"])
        return self.record
