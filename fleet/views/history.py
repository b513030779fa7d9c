"""The history of changes: who, when, from where, old and new."""

from __future__ import annotations

from typing import Any

from django import forms
from django.core.paginator import Paginator
from django.http import HttpResponse
from django.shortcuts import render

from fleet.changes import KINDS, OFFICE_KINDS, tell
from fleet.formats import moment
from fleet.forms.record import CodeInput, DayInput
from fleet.history import SOURCES
from fleet.models import Person
from fleet.rights import CATALOGUE, PEOPLE, may, needs
from fleet.views.listing import as_csv, csv_address

PAGE_SIZE = 50
MOST_IN_FILE = 20_000


class HistoryFilter(forms.Form):
    """Which changes to show; an empty field means all."""

    kind = forms.ChoiceField(label="Sort of record", required=False)
    record = forms.IntegerField(required=False, widget=forms.HiddenInput, min_value=1, max_value=2**62)
    who = CodeInput(label="By (code)", required=False, help_text="")
    source = forms.ChoiceField(
        label="From where", required=False, choices=[("", "anywhere"), *((name, name) for name in SOURCES)]
    )
    from_on = DayInput(label="From", required=False)

    def __init__(self, *args: Any, person: Person, **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        kinds = [kind for kind in KINDS if kind not in OFFICE_KINDS or may(person, PEOPLE)]
        self.fields["kind"].choices = [(kind, kind.replace("-", " ")) for kind in kinds]

    def kind_asked(self) -> str:
        return self.cleaned_data.get("kind") or "visit"


@needs(CATALOGUE)
def history(request: Any) -> HttpResponse:
    form = HistoryFilter(request.GET, person=request.user)
    if not form.is_valid():
        return render(request, "history/page.html", {"form": form, "kind": "visit"}, status=422)
    kind = form.kind_asked()
    rows = changes_of(request, kind, form.cleaned_data)
    if request.GET.get("as") == "csv":
        return as_csv(
            f"changes of {kind}", ["at", "who", "from", "what", "change", "reason"], lines(request, kind, rows)
        )
    page = Paginator(rows, PAGE_SIZE).get_page(request.GET.get("page"))
    context = {
        "form": form,
        "kind": kind,
        "told": tell(kind, list(page), request.seen),
        "page": page,
        "exports": [{"name": "CSV", "url": csv_address(request)}],
    }
    return render(request, "history/page.html", context)


def changes_of(request: Any, kind: str, asked: dict[str, Any]) -> Any:
    model = KINDS[kind]
    key = model._meta.pk.attname
    rows = model.history.select_related("history_user").order_by("-history_id")  # type: ignore[attr-defined]
    if kind not in OFFICE_KINDS or kind == "person":
        rows = rows.filter(**{f"{key}__in": request.seen(model).values("pk")})
    if asked.get("record"):
        rows = rows.filter(**{key: asked["record"]})
    if asked.get("who"):
        rows = rows.filter(history_user__code=asked["who"])
    if asked.get("source"):
        rows = rows.filter(source=asked["source"])
    if asked.get("from_on"):
        rows = rows.filter(history_date__date__gte=asked["from_on"])
    return rows


def lines(request: Any, kind: str, rows: Any) -> list[list[str]]:
    return [
        [
            moment(each.at),
            each.who,
            each.source,
            f"{each.name} {each.verb}",
            "; ".join(f"{field}: {before or 'empty'} → {after}" for field, before, after in each.changes),
            each.reason,
        ]
        for each in tell(kind, list(rows[:MOST_IN_FILE]), request.seen)
    ]
