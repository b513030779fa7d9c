"""Forms of components, failure modes, module types, positions and parts."""

from __future__ import annotations

from typing import Any

from django import forms

from fleet.forms.record import CodeInput, RecordForm
from fleet.models import Clock, Component, ModuleType, Part, PartState


class ComponentForm(RecordForm):
    noun = "component"
    code = CodeInput(label="Component code")
    name = forms.CharField(max_length=120, required=False)
    clock = forms.ChoiceField(choices=Clock.choices, help_text="What its life is counted in.")

    def action(self) -> Any:
        from fleet.actions.save_component import save_component

        return save_component


class ModeForm(RecordForm):
    """A failure mode of one component."""

    noun = "mode"
    code = CodeInput(label="Mode code")
    name = forms.CharField(max_length=120, required=False, help_text="What crews read: thread worn out …")
    mechanism = forms.CharField(max_length=120, required=False, help_text="Wear, corrosion, fatigue, overload …")
    cause = forms.CharField(max_length=120, required=False)
    goes_to_bench = forms.BooleanField(required=False, label="The module goes to the bench for it")

    def action(self) -> Any:
        from fleet.actions.save_mode import save_mode

        return save_mode

    def fields_to_save(self) -> dict[str, Any]:
        return super().fields_to_save() | {"component": self.component}

    component: Any = None


class TypeForm(RecordForm):
    noun = "type"
    code = CodeInput(label="Type code")
    name = forms.CharField(max_length=120, required=False)
    cautions = forms.CharField(
        max_length=4000,
        required=False,
        widget=forms.Textarea(attrs={"rows": 7}),
        label="Before you open it",
        help_text=(
            "Shown wherever somebody is sent to a module: isolation and lock-out, stored energy, lamps, wet and "
            "confined places, permits. The site's own rules, local codes and licensed persons come first."
        ),
    )

    def action(self) -> Any:
        from fleet.actions.save_type import save_type

        return save_type


class PositionForm(RecordForm):
    """A position of one module type."""

    noun = "position"
    code = CodeInput(label="Position code")
    component = forms.ModelChoiceField(queryset=None, to_field_name="code", empty_label="choose one")
    order = forms.IntegerField(min_value=0, max_value=9999, initial=0, help_text="Where it stands in the list.")
    type: Any = None

    def prepare(self) -> None:
        self.fields["component"].queryset = self.request.seen(Component)

    def opened(self, record: Any) -> dict[str, Any]:
        return super().opened(record) | {"component": record.component.code}

    def action(self) -> Any:
        from fleet.actions.save_position import save_position

        return save_position

    def fields_to_save(self) -> dict[str, Any]:
        return super().fields_to_save() | {"type": self.type}


class PartForm(RecordForm):
    noun = "part"
    code = CodeInput(label="Part number")
    component = forms.ModelChoiceField(queryset=None, to_field_name="code", empty_label="choose one")
    revision = forms.CharField(max_length=20, required=False)
    name = forms.CharField(max_length=120, required=False)
    supersedes = forms.ModelChoiceField(
        queryset=None, to_field_name="code", required=False, empty_label="no other part"
    )
    fits_types = forms.ModelMultipleChoiceField(
        queryset=None,
        to_field_name="code",
        required=False,
        widget=forms.CheckboxSelectMultiple,
        help_text="None ticked: it fits every type.",
    )
    state = forms.ChoiceField(choices=PartState.choices, help_text="Crews are offered the current design first.")
    supplier = forms.CharField(max_length=120, required=False)
    unit_cost = forms.DecimalField(required=False, min_value=0, max_digits=10, decimal_places=2)
    lead_time_days = forms.IntegerField(required=False, min_value=0, max_value=3650, label="Lead time, days")
    pack = forms.IntegerField(min_value=1, max_value=100_000, initial=1, label="Parts in a pack")
    minimum = forms.IntegerField(min_value=0, max_value=1_000_000, initial=0, label="Smallest order")

    def prepare(self) -> None:
        self.fields["component"].queryset = self.request.seen(Component)
        others = self.request.seen(Part)
        self.fields["supersedes"].queryset = others.exclude(pk=self.record.pk) if self.record else others
        self.fields["fits_types"].queryset = self.request.seen(ModuleType)

    def opened(self, record: Any) -> dict[str, Any]:
        return super().opened(record) | {
            "component": record.component.code,
            "supersedes": record.supersedes.code if record.supersedes else None,
            "fits_types": [each.code for each in record.fits_types.all()],
        }

    def action(self) -> Any:
        from fleet.actions.save_part import save_part

        return save_part
