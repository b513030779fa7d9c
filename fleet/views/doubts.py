"""“Looks wrong”: saying it, the list of what waits, and settling it."""

from __future__ import annotations

from typing import Any

from django.contrib import messages
from django.http import HttpResponse
from django.shortcuts import get_object_or_404, redirect, render
from django.urls import reverse
from django.views.decorators.http import require_POST

from fleet.actions.errors import RecordError
from fleet.forms.correct import CORRECT_FORMS, LooksWrongForm, SettleForm
from fleet.forms.errors import add_record_error
from fleet.models import LooksWrong
from fleet.record_words import record_words
from fleet.records_by_kind import DOUBTED, module_of, seen_record
from fleet.rights import CORRECT, REPORT, needs
from fleet.views.listing import Column, Listing

LIST = Listing(
    columns=[
        Column(
            "what",
            "Record",
            lambda doubt: {
                "text": f"{doubt.module.code}, {doubt.kind}",
                "url": reverse("settle_doubt", args=[doubt.pk]) if not doubt.outcome else "",
            },
            sort=("module__code_order",),
        ),
        Column("word", "What looks wrong", lambda doubt: doubt.word),
        Column("who", "Said by", lambda doubt: doubt.said_by.name, sort=("said_by__name",)),
        Column("when", "When", lambda doubt: doubt.said_at, sort=("said_at",), numeric=True),
        Column("outcome", "What came of it", lambda doubt: doubt.outcome or "waits", sort=("outcome",)),
        Column("answer", "A word back", lambda doubt: doubt.answer),
    ],
    what="marks",
    caption="Records marked as looking wrong",
    sort="-when",
    empty_state="Nothing is marked as looking wrong.",
    empty_remedy="Anyone may mark a record on a module's page.",
)


@needs(REPORT)
@require_POST
def say_looks_wrong(request: Any, kind: str, pk: int) -> HttpResponse:
    from fleet.actions.say_looks_wrong import say_looks_wrong as say

    record = seen_record(request, kind, pk, kinds=DOUBTED)
    form = LooksWrongForm(request.POST)
    if form.is_valid():
        try:
            say(by=request.user, record=record, word=form.cleaned_data["word"])
        except RecordError as error:
            add_record_error(form, error)
        else:
            messages.success(request, "Marked. It waits until a planner or manager corrects or confirms it.")
            return redirect("module", tag=module_of(record).code)
    context = {"title": f"What looks wrong with this {kind}", "form": form, "submit": "Mark it"}
    return render(request, "list/edit.html", context, status=422)


@needs(CORRECT)
def doubts(request: Any) -> HttpResponse:
    rows = request.seen(LooksWrong).select_related("module", "said_by")
    return LIST.answer(request, rows, title="Looks wrong", lead=waiting_sentence(rows.waiting().count()))


def waiting_sentence(count: int) -> str:
    if count == 0:
        return "Nothing waits."
    waits = "One record is marked as wrong and waits" if count == 1 else f"{count} records are marked as wrong and wait"
    return f"{waits} for a decision."


@needs(CORRECT)
def settle_doubt(request: Any, pk: int) -> HttpResponse:
    from fleet.actions.settle_looks_wrong import settle_looks_wrong

    doubt = get_object_or_404(request.seen(LooksWrong).select_related("module", "said_by"), pk=pk)
    form = SettleForm(request.POST if request.method == "POST" else None)
    if request.method == "POST" and form.is_valid():
        try:
            settle_looks_wrong(by=request.user, doubt=doubt, **form.cleaned_data)
        except RecordError as error:
            add_record_error(form, error)
        else:
            messages.success(request, "Settled.")
            return redirect("doubts")
    record = request.seen(DOUBTED[doubt.kind]).filter(pk=doubt.record).first()
    context = {
        "doubt": doubt,
        "form": form,
        "record": record,
        "words": record_words(record) if record else f"{doubt.kind}: no longer on record, or not at a site of yours",
        "can_correct": doubt.kind in CORRECT_FORMS,
        "crumbs": [{"name": "Looks wrong", "url": reverse("doubts")}],
    }
    return render(request, "doubts/settle.html", context, status=422 if form.is_bound else 200)
