"""Redesigns: what replaced what, how far the rollout has come, and what the records say about it."""

from __future__ import annotations

import datetime as dt
from typing import Any

from django.http import HttpResponse, JsonResponse
from django.shortcuts import get_object_or_404, render
from django.urls import reverse
from django.utils import timezone

from fleet.models import Redesign, RedesignChange
from fleet.rights import COSTS, LIFE, may, needs
from fleet.rollout import by_site, done_words
from fleet.views.listing import Column, Listing, as_csv
from reliability.forms.redesign import EvidenceForm

CRUMBS = [{"name": "Redesigns", "url": "/redesigns/"}]

LIST = Listing(
    columns=[
        Column(
            "redesign",
            "Redesign",
            lambda each: {"text": each.code, "url": reverse("redesign", args=[each.code]), "sub": each.name},
            plain=lambda each: each.code,
            sort=("code_order",),
        ),
        Column("new", "New parts", lambda each: ", ".join(line.new_part.code for line in each.changes.all())),
        Column(
            "replaced",
            "In place of",
            lambda each: ", ".join(part.code for line in each.changes.all() for part in line.replaces.all()),
        ),
        Column("hope", "Hope, times as long", lambda each: each.hope, sort=("hope",), numeric=True),
        Column("starts", "First day", lambda each: each.starts_on, sort=("starts_on",)),
    ],
    what="redesigns",
    caption="Redesigns",
    sort="redesign",
    empty_state="No redesign yet.",
    empty_remedy="It names the new part and those that it replaces; its page shows whether the new one lives longer.",
)


@needs(LIFE)
def redesigns(request: Any) -> HttpResponse:
    rows = request.seen(Redesign).prefetch_related("changes__new_part", "changes__replaces")
    actions = [{"name": "Add a redesign", "url": reverse("new_redesign")}]
    return LIST.answer(request, rows, title="Redesigns", actions=actions)


@needs(LIFE)
def redesign(request: Any, code: str) -> HttpResponse:
    """The evidence on one component of a redesign."""
    record, form, line = asked_for(request, code)
    if line is None or not form.is_valid():
        context = {"redesign": record, "form": form, "crumbs": CRUMBS, "actions": actions_of(record)}
        return render(request, "redesigns/page.html", context, status=200 if form.is_valid() else 422)
    document = seen_document(request, record, form, line)
    kind = request.GET.get("as")
    if kind == "json":
        return JsonResponse(document, json_dumps_params={"ensure_ascii": False})
    if kind == "csv":
        from reliability.redesign_files import HEAD, lines

        return as_csv(f"redesign {record.code}", HEAD, lines(document))  # type: ignore[return-value]
    return render(request, "redesigns/page.html", context_of(request, record, form, line, document))


@needs(LIFE)
def redesign_print(request: Any, code: str) -> HttpResponse:
    """Two sheets for a meeting: one for who decides, one for the engineer who checks."""
    record, form, line = asked_for(request, code)
    if line is None or not form.is_valid():
        return redesign(request, code)
    document = seen_document(request, record, form, line)
    context = context_of(request, record, form, line, document)
    context |= {"money": money_context(request, record, form, document), "printed_on": timezone.localdate()}
    context["pages"] = [(line, document, context), *other_pages(request, record, form, line)]
    return render(request, "redesigns/print.html", context)


@needs(LIFE)
def redesign_money(request: Any, code: str) -> HttpResponse:
    """Whether it pays; counted apart, since it takes longer than the evidence."""
    record, form, line = asked_for(request, code)
    context: dict[str, Any] = {"redesign": record, "crumbs": [*CRUMBS, crumb_of(record)]}
    if line is not None and form.is_valid():
        document = seen_document(request, record, form, line)
        context["money"] = money_context(request, record, form, document)
    template = "redesigns/money.html" if request.htmx else "redesigns/money_page.html"
    return render(request, template, context)


def asked_for(request: Any, code: str) -> tuple[Redesign, EvidenceForm, RedesignChange | None]:
    record = get_object_or_404(request.seen(Redesign), code=code.upper())
    lines = list(record.changes.select_related("new_part__component").prefetch_related("replaces"))
    form = EvidenceForm(request.GET, request=request, lines=lines)
    return record, form, form.line() if lines and form.is_valid() else None


def question_of(record: Redesign, form: EvidenceForm, line: RedesignChange) -> Any:
    from reliability.redesigns.question import RedesignQuestion, successors_among

    replaced = list(line.replaces.all())
    own = line.new_part.component_id  # modes and candidates chosen are of the component that is shown
    return RedesignQuestion(
        component=line.new_part.component,
        new=(line.new_part.code,),
        old=tuple(part.code for part in replaced),
        newer=successors_among(replaced, line.new_part),
        as_of=form.as_of_day(),
        hope=record.hope,
        not_before=record.starts_on,
        modes=tuple(mode.code for mode in form.cleaned_data["mode"] if mode.component_id == own),
        also=tuple(part.code for part in form.cleaned_data["also"] if part.component_id == own),
    )


def seen_document(request: Any, record: Redesign, form: EvidenceForm, line: RedesignChange) -> dict[str, Any]:
    """Estimates come from everywhere; by name a person sees only their own sites."""
    from fleet.models import Site
    from reliability.redesigns.document import kept_redesign
    from reliability.redesigns.seen import only_sites

    document = kept_redesign(question_of(record, form, line))
    if request.user.all_sites:
        return document
    return only_sites(document, set(request.seen(Site).values_list("code", flat=True)))


def context_of(
    request: Any, record: Redesign, form: EvidenceForm, line: RedesignChange, document: dict[str, Any]
) -> dict[str, Any]:
    from reliability.redesign_page import page_of

    address = request.GET.copy()
    address.pop("as", None)
    query = f"?{address.urlencode()}" if address else ""
    join = "&" if query else "?"
    sheets = reverse("redesign_print", args=[record.code])
    return {
        "redesign": record,
        "line": line,
        "form": form,
        "document": document,
        "as_of": dt.date.fromisoformat(document["as_of"]),
        "crumbs": CRUMBS,
        "actions": actions_of(record),
        # inside what follows the choices, so that it prints what is shown
        "sheets_name": "Two sheets for a meeting" if len(form.lines) < 2 else "Sheets for a meeting",
        "sheets_url": sheets + query,
        "money_url": reverse("redesign_money", args=[record.code]) + query,
        "back": reverse("redesign", args=[record.code]) + query,
        "exports": [{"name": "CSV", "url": f"{query}{join}as=csv"}, {"name": "JSON", "url": f"{query}{join}as=json"}],
        "rollout": progress_of(request, record),
        "others": other_verdicts(request, record, form, line),
        **page_of(document),
    }


def other_pages(
    request: Any, record: Redesign, form: EvidenceForm, shown: RedesignChange
) -> list[tuple[RedesignChange, dict[str, Any], dict[str, Any]]]:
    """The evidence on the other components of the redesign."""
    from reliability.redesign_page import page_of

    found = []
    for line in form.lines:
        if line != shown:
            document = seen_document(request, record, form, line)
            found.append((line, document, page_of(document, f"-{line.new_part.component.code}")))
    return found


def other_verdicts(request: Any, record: Redesign, form: EvidenceForm, shown: RedesignChange) -> list[dict[str, str]]:
    """What is known of the other components, in a sentence each, with the way there."""
    from reliability.redesign_words import verdict_words

    found = []
    for line in form.lines:
        if line != shown:
            address = request.GET.copy()
            address.pop("as", None)
            for name in ("mode", "also"):
                address.pop(name, None)
            address["component"] = line.new_part.component.code
            found.append(
                {
                    "name": line.new_part.component.title,
                    "verdict": verdict_words(seen_document(request, record, form, line)),
                    "url": f"?{address.urlencode()}",
                }
            )
    return found


def actions_of(record: Redesign) -> list[dict[str, Any]]:
    return [
        {"name": "Rollout", "url": reverse("rollout", args=[record.code]), "quiet": True},
        {"name": "Change", "url": reverse("edit_redesign", args=[record.code]), "quiet": True},
    ]


def crumb_of(record: Redesign) -> dict[str, str]:
    return {"name": record.title, "url": reverse("redesign", args=[record.code])}


def progress_of(request: Any, record: Redesign) -> dict[str, Any] | None:
    """Modules planned and done, by site."""
    from fleet.views.redesigns import steps_of

    rows = steps_of(request, record)
    if not rows:
        return None
    sites = by_site(((step.now_site or "no place", step.planned_on, done) for step, done in rows), timezone.localdate())
    done = sum(done.done for _, done in rows)
    return {"sites": sites, "sentence": done_words(done, len(rows), record.changes.count())}


def money_context(
    request: Any, record: Redesign, form: EvidenceForm, document: dict[str, Any]
) -> dict[str, Any] | None:
    """Costs, failures and money with and without, of all components; None for those who may not see costs."""
    from fleet.models import Book
    from reliability.redesign_money import money_page
    from reliability.redesigns.money import Costs, Side, kept_money
    from reliability.redesigns.plan_left import plan_left

    if not may(request.user, COSTS):
        return None
    book = Book.load()
    costs = Costs(
        visits_a_failure=record.visits_a_failure,
        visit=float(book.visit_cost),
        bench_hours_a_failure=record.bench_hours_a_failure,
        bench_hour=float(book.bench_hour_cost),
        stop_days_a_failure=record.stop_days_a_failure,
        stop_day=float(book.stop_cost_per_day),
        module=float(record.cost_a_module or 0),
    )
    plan, positions = plan_left(record)
    sides = tuple(
        Side(
            component=line.new_part.component,
            new=line.new_part.code,
            old=newest_old(line).code,
            replaced=tuple(part.code for part in line.replaces.all()),
            old_cost=float(newest_old(line).unit_cost or 0),
            new_cost=float(line.new_part.unit_cost or 0),
            positions=positions.get(line.new_part.component_id, 0),
            as_of=dt.date.fromisoformat(document["as_of"]),
            hope=record.hope,
            confidence=document["confidence"],
            not_before=record.starts_on,
        )
        for line in form.lines
    )
    found = kept_money(sides, costs, plan, form.rests_on())
    return money_page(found, sides, costs, book.currency, only_modes=bool(document["modes"]))


def newest_old(line: RedesignChange) -> Any:
    """The design that would go in without the new one: the last of those replaced."""
    old = list(line.replaces.all())
    superseded = {part.supersedes_id for part in old}
    return next((part for part in reversed(old) if part.pk not in superseded), old[-1])
