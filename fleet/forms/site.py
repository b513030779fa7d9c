"""A site's form."""

from __future__ import annotations

from typing import Any

from django import forms

from fleet.forms.record import CodeInput, DayInput, RecordForm
from fleet.models import SiteKind
from fleet.models.zones import zone_names

REPORTS = [("", "not known"), ("yes", "yes"), ("no", "no: failures are found at visits")]


class SiteForm(RecordForm):
    noun = "site"
    code = CodeInput(label="Site code")
    name = forms.CharField(max_length=120, required=False)
    kind = forms.ChoiceField(choices=SiteKind.choices, help_text="A rig is a test stand; at a depot parts do not age.")
    zone = forms.ChoiceField(required=False, label="Time zone", help_text="Empty: the book's zone.")
    reports_at_once = forms.ChoiceField(
        choices=REPORTS,
        required=False,
        label="Is every failure reported at once?",
        help_text="Life estimates need this answer: where it is no, a part counts as good only up to the last visit.",
    )
    records_from = DayInput(
        required=False,
        label="Removals written down since",
        help_text="Only where parts had been changed before anybody kept records.",
    )
    strokes_per_day = forms.FloatField(
        required=False, min_value=0, max_value=1e7, help_text="Used where no counter is read."
    )
    hours_per_day = forms.FloatField(required=False, min_value=0, max_value=24)
    next_visit_on = DayInput(required=False, label="Next planned visit")
    visit_every_days = forms.IntegerField(required=False, min_value=1, max_value=3650, label="Days between visits")

    def prepare(self) -> None:
        self.fields["zone"].choices = [("", "the book's zone"), *((name, name) for name in sorted(zone_names()))]

    def opened(self, record: Any) -> dict[str, Any]:
        answer = {True: "yes", False: "no", None: ""}[record.reports_at_once]
        return super().opened(record) | {"reports_at_once": answer}

    def clean_reports_at_once(self) -> bool | None:
        return {"yes": True, "no": False}.get(self.cleaned_data["reports_at_once"])

    def action(self) -> Any:
        from fleet.actions.save_site import save_site

        return save_site
