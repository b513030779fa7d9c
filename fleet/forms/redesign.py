"""Forms of a redesign and of its rollout."""

from __future__ import annotations

from typing import Any

from django import forms
from django.core.exceptions import ValidationError

from fleet.forms.record import CodeInput, DayInput, RecordForm
from fleet.models import Book, Component, Module, ModuleType, Part, Site


class RedesignForm(RecordForm):
    """New parts and those they replace are chosen as two lists; a line is made for each component."""

    noun = "redesign"
    code = CodeInput(label="Code of the redesign")
    name = forms.CharField(max_length=120, required=False)
    new_parts = forms.ModelMultipleChoiceField(
        queryset=None,
        to_field_name="code",
        label="New parts",
        widget=forms.SelectMultiple(attrs={"size": 6}),
        help_text="One for each component that changes: a new nut may come with a new guide.",
    )
    replaced = forms.ModelMultipleChoiceField(
        queryset=None,
        to_field_name="code",
        label="Parts replaced",
        widget=forms.SelectMultiple(attrs={"size": 8}),
        help_text="The older designs whose place they take, of the same components.",
    )
    hope = forms.FloatField(
        min_value=1.01,
        max_value=100,
        initial=1.5,
        label="Hope, times as long a life",
        help_text="Fixes how much must be seen before anything is called clear. Decide it before you look.",
    )
    starts_on = DayInput(
        required=False,
        label="First day of the rollout",
        help_text="Empty: the day the first new part went in at each site.",
    )
    cost_a_module = forms.DecimalField(
        required=False,
        min_value=0,
        max_digits=10,
        decimal_places=2,
        help_text="Work and material beyond the parts themselves, once a module.",
    )
    visits_a_failure = forms.FloatField(min_value=0, max_value=100, initial=1, label="Crew visits a failure")
    bench_hours_a_failure = forms.FloatField(min_value=0, max_value=1000, initial=0, label="Bench hours a failure")
    stop_days_a_failure = forms.FloatField(min_value=0, max_value=365, initial=1, label="Days of standstill a failure")
    note = forms.CharField(max_length=2000, required=False, widget=forms.Textarea(attrs={"rows": 3}))

    def prepare(self) -> None:
        parts = self.request.seen(Part).select_related("component").order_by("component__code_order", "code_order")
        for name in ("new_parts", "replaced"):
            self.fields[name].queryset = parts
            self.fields[name].label_from_instance = lambda part: f"{part.title} ({part.component.title})"
        self.fields["cost_a_module"].label = f"Cost of the rollout a module, {Book.load().currency}"

    def opened(self, record: Any) -> dict[str, Any]:
        lines = record.changes.prefetch_related("replaces")
        return super().opened(record) | {
            "new_parts": [line.new_part.code for line in lines],
            "replaced": [part.code for line in lines for part in line.replaces.all()],
        }

    def clean(self) -> dict[str, Any]:
        """Each side needs the other; what is wrong within one component the action says."""
        asked = super().clean() or {}
        new, old = asked.get("new_parts"), asked.get("replaced")
        if new is None or old is None:
            return asked
        lonely = {part.component_id: part for part in old}
        for part in new:
            lonely.pop(part.component_id, None)
        for part in lonely.values():
            self.add_error("replaced", f"No new part is a {part.component.title}, so {part.code} is not replaced.")
        return asked

    def action(self) -> Any:
        from fleet.actions.save_redesign import save_redesign

        return save_redesign

    def fields_to_save(self) -> dict[str, Any]:
        from fleet.actions.save_redesign import PartReplaced

        fields = super().fields_to_save()
        new, old = fields.pop("new_parts"), fields.pop("replaced")
        changes = [
            PartReplaced(part, [each for each in old if each.component_id == part.component_id and each != part])
            for part in new
        ]
        return {**fields, "changes": changes}


class PlanForm(forms.Form):
    """Modules to put at the end of a plan: all of some sites, or named by tag."""

    sites = forms.ModelMultipleChoiceField(
        queryset=None, to_field_name="code", required=False, widget=forms.CheckboxSelectMultiple, label="All modules of"
    )
    type = forms.ModelChoiceField(
        queryset=None, to_field_name="code", required=False, label="Only of type", empty_label="every type"
    )
    tags = forms.CharField(
        required=False,
        max_length=20_000,
        label="Or these modules",
        widget=forms.Textarea(attrs={"rows": 3, "autocapitalize": "characters", "spellcheck": "false"}),
        help_text="Tags, with commas, blanks or lines between them.",
    )
    first_on = DayInput(required=False, label="First planned day")
    modules_a_week = forms.IntegerField(required=False, min_value=1, max_value=10_000, label="Modules a week")

    def __init__(self, *args: Any, request: Any, redesign: Any, **kwargs: Any) -> None:
        self.request, self.redesign = request, redesign
        super().__init__(*args, **kwargs)
        components = request.seen(Component).filter(parts__redesigns__redesign=redesign)
        self.fields["sites"].queryset = request.seen(Site).exclude(kind="depot")
        self.fields["sites"].label_from_instance = lambda site: f"{site.title} ({site.code})"
        self.fields["type"].queryset = request.seen(ModuleType).filter(positions__component__in=components).distinct()

    def clean_tags(self) -> list[str]:
        return self.cleaned_data["tags"].replace(",", " ").replace(";", " ").upper().split()

    def clean(self) -> dict[str, Any]:
        asked = super().clean() or {}
        if self.errors:
            return asked
        if not asked["sites"] and not asked["tags"]:
            raise ValidationError("No module is named. Tick a site, or write tags.")
        asked["modules"] = self.modules(asked)
        if not asked["modules"] and not self.errors:
            raise ValidationError("No module of these sites holds such a part, or all are in the plan already.")
        return asked

    def modules(self, asked: dict[str, Any]) -> list[Module]:
        """In the order of sites, then tags; only modules with a position for one of the new parts."""
        wanted = (
            self.request.seen(Module)
            .with_state()
            .filter(scrapped_on=None, type__in=self.fields["type"].queryset)
            .exclude(rollout_steps__in=self.redesign.steps.filter(struck_out=""))
            .order_by("now_site_code", "code_order")
        )
        if asked["type"]:
            wanted = wanted.filter(type=asked["type"])
        tags, sites = asked["tags"], [site.pk for site in asked["sites"]]
        at_sites = list(wanted.filter(now_site_id__in=sites)) if sites else []
        by_tag = {module.code: module for module in wanted.filter(code__in=tags)} if tags else {}
        self.tell_unknown(tags, by_tag)
        return list(dict.fromkeys([*at_sites, *(by_tag[tag] for tag in tags if tag in by_tag)]))

    def tell_unknown(self, tags: list[str], found: dict[str, Module]) -> None:
        missing = [tag for tag in dict.fromkeys(tags) if tag not in found]
        if missing:
            known = set(self.request.seen(Module).filter(code__in=missing).values_list("code", flat=True))
            for tag in missing[:5]:
                why = "is not in the book"
                if tag in known:
                    why = "has no place for the new part, or is in the plan already"
                self.add_error("tags", f"{tag[:40]} {why}. Take it out of the list.")


class StepForm(RecordForm):
    """One module of a plan: another day, or out of the plan with a reason."""

    noun = "step"
    planned_on = DayInput(required=False, label="Planned for", help_text="Empty: no day yet.")

    def action(self) -> Any:
        from fleet.actions.plan_rollout import move_step

        return move_step


class DropStepForm(RecordForm):
    noun = "step"
    reason = forms.CharField(max_length=500, label="Why it leaves the plan")

    def action(self) -> Any:
        from fleet.actions.plan_rollout import drop_step

        return drop_step
