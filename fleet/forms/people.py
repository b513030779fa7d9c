"""Forms of people and of the book's settings."""

from __future__ import annotations

from typing import Any

from django import forms

from fleet.forms.record import CodeInput, RecordForm
from fleet.models import Role, Site
from fleet.models.zones import zone_names


class PersonForm(RecordForm):
    noun = "person"
    code = CodeInput(label="Code to sign in with")
    name = forms.CharField(max_length=120)
    role = forms.ChoiceField(choices=Role.choices)
    all_sites = forms.BooleanField(required=False, label="Sees all sites, those added later too")
    sites = forms.ModelMultipleChoiceField(
        queryset=None, to_field_name="code", required=False, widget=forms.CheckboxSelectMultiple
    )
    is_active = forms.BooleanField(required=False, initial=True, label="May sign in")

    def prepare(self) -> None:
        self.fields["sites"].queryset = self.request.seen(Site)
        self.fields["sites"].label_from_instance = lambda site: f"{site.title} ({site.code})"

    def opened(self, record: Any) -> dict[str, Any]:
        return super().opened(record) | {"sites": [site.code for site in record.sites.all()]}

    def action(self) -> Any:
        from fleet.actions.save_person import save_person

        return save_person


class BookForm(RecordForm):
    noun = "book"
    name = forms.CharField(max_length=80, label="Name of this book")
    currency = forms.RegexField(
        r"^[A-Z]{3}$", label="Currency", error_messages={"invalid": "Write the currency as three letters, like EUR."}
    )
    zone = forms.ChoiceField(label="Time zone of the office, and of sites that have none of their own")
    bench_target = forms.IntegerField(min_value=0, max_value=100_000, label="Modules the bench may have waiting")
    review_period_days = forms.IntegerField(min_value=1, max_value=366, label="Days between two orders")
    visit_cost = forms.DecimalField(
        min_value=0, max_digits=10, decimal_places=2, label="Cost of a visit, in this currency"
    )
    stop_cost_per_day = forms.DecimalField(
        min_value=0, max_digits=10, decimal_places=2, label="Cost of a day's stop, in this currency"
    )
    bench_hour_cost = forms.DecimalField(
        min_value=0, max_digits=10, decimal_places=2, label="Cost of a bench hour, in this currency"
    )
    service_level = forms.FloatField(
        min_value=0.5, max_value=0.999, label="Wanted chance of not running out", help_text="0.95 is 95 in 100."
    )

    def prepare(self) -> None:
        self.fields["zone"].choices = [(name, name) for name in sorted(zone_names())]

    def action(self) -> Any:
        from fleet.actions.save_book import save_book

        return save_book

    def save_by(self, person: Any) -> Any:
        return self.action()(by=person, version=self.cleaned_data.get("version"), **self.fields_to_save())
