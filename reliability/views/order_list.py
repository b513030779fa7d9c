"""What to order today: every part with its reasons, what is ticked as one supply order, and the list as files."""

from __future__ import annotations

import datetime as dt
from typing import Any

from django.contrib import messages
from django.http import HttpResponse, JsonResponse
from django.http.response import HttpResponseBase
from django.shortcuts import redirect, render
from django.urls import reverse
from django.utils import timezone
from django.views.decorators.cache import never_cache

from fleet.actions.errors import RecordError
from fleet.actions.place_supply_order import OrderedPart, place_supply_order
from fleet.formats import counted
from fleet.forms.errors import add_record_error
from fleet.models import Book, Part
from fleet.rights import STOCK, needs
from fleet.views.listing import as_csv
from fleet.work import enqueue
from reliability.forms.order_list import OrderListForm, OrderWhatIfForm, TickedForm
from reliability.views import order_tables as tables
from reliability.views.counting import is_page, still_counting

CRUMBS = [{"name": "Stores", "url": "/stores/"}]
WHOLE_BOOK = (
    "The order list counts the use of the whole fleet and what lies in all stores, and you see some of them only. "
    "Ask a planner who sees all sites."
)
MOST_SUPPLIER = 120

Document = dict[str, Any]


@needs(STOCK)
@never_cache
def order_list(request: Any) -> HttpResponseBase:
    if not request.user.all_sites:
        return render(request, "order/page.html", {"refused": WHOLE_BOOK, "crumbs": CRUMBS})
    if request.method == "POST" and "again" in request.POST:
        return count_again(request)
    form = OrderListForm(request.GET, request=request)
    what_if = OrderWhatIfForm(request.GET, request=request)
    if not (form.is_valid() and what_if.is_valid()):
        context = {"form": form, "what_if": what_if, "faults": True, "crumbs": CRUMBS}
        return render(request, "order/page.html", context, status=422)
    waiting = still_counting(request, "#list", also="#order-lead") if is_page(request) else None
    if waiting is not None:
        return while_counting(request, form, what_if, waiting)
    document, parts = asked_document(request, what_if), parts_of(request)
    lines = tables.chosen_lines(document, parts, form.cleaned_data, request.GET.get("sort", ""))
    kind = request.GET.get("as")
    if kind == "json":
        return JsonResponse(plain(document, lines), json_dumps_params={"ensure_ascii": False})
    if kind == "csv":
        return as_csv("order list", tables.FILE_HEAD, (tables.file_line(line) for line in lines))
    ticks = ticked_form(request, lines, parts)
    if request.method == "POST" and ticks.is_valid():
        try:
            order = placed(request, ticks)
        except RecordError as error:
            add_record_error(ticks, error)
        else:
            messages.success(request, f"Order {order.code} is placed: {counted(order.lines.count(), 'line')}.")
            return redirect("supply_order", code=order.code)
    context = {
        "form": form,
        "what_if": what_if,
        "document": document,
        "lead": document["sentence"],
        "parts_there": bool(document["lines"]),
        "columns": tables.COLUMNS,
        "rows": [tables.row(line, ticks.cells(line["part"]), document["currency"]) for line in lines],
        "ticks": ticks,
        "notes": tables.notes(document),
        "address": request.GET.urlencode(),
        "crumbs": CRUMBS,
        "older": None if document["current"] else dt.datetime.fromisoformat(document["counted_at"]),
        "today": timezone.localdate(),
    }
    template = "order/print.html" if kind == "print" else "order/page.html"
    return render(request, template, context, status=422 if ticks.is_bound else 200)


def while_counting(request: Any, form: OrderListForm, what_if: OrderWhatIfForm, waiting: Document) -> HttpResponse:
    """The list of the last day, to look at and not to order from, while today's is being counted."""
    from reliability.forecasts.kept_order import earlier_document

    if waiting["unchanged"]:
        return HttpResponse(status=204)
    context: Document = {
        "form": form, "what_if": what_if, "counting": waiting, "address": request.GET.urlencode(), "crumbs": CRUMBS,
        "today": timezone.localdate(),
    }  # fmt: skip
    earlier = earlier_document()
    if earlier is not None:
        lines = tables.chosen_lines(earlier, parts_of(request), form.cleaned_data, request.GET.get("sort", ""))
        context |= {
            "earlier": dt.date.fromisoformat(earlier["as_of"]),
            "lead": earlier["sentence"],
            "columns": tables.COLUMNS,
            "rows": [tables.row(line, {}, earlier["currency"]) for line in lines],
            "notes": tables.notes(earlier),
        }
    return render(request, "order/page.html", context)


def asked_document(request: Any, what_if: OrderWhatIfForm) -> Document:
    """The kept list, or one made for what is assumed."""
    from reliability.forecasts.coming_use import kept_uses
    from reliability.forecasts.kept_order import order_document
    from reliability.forecasts.switching import assumed_switches

    currency = Book.load().currency
    level, new = what_if.service_level(), what_if.cleaned_data["superseding"]
    if level is None and new is None:
        return order_document(currency)
    switches = []
    if new is not None:
        use = kept_uses([new.component], count=True)[new.component.code]
        begin = max(what_if.cleaned_data["superseding_from"] or use.begin, use.begin)
        switches = assumed_switches(use, new.code, begin, what_if.cleaned_data["retrofit_a_week"] or 0.0)
    return order_document(currency, assumed=switches, service_level=level)


def parts_of(request: Any) -> dict[str, Any]:
    return {part.code: part for part in request.seen(Part).select_related("component")}


def ticked_form(request: Any, lines: list[Document], parts: dict[str, Any]) -> TickedForm:
    listed = [parts[line["part"]] for line in lines if line["part"] in parts]
    quantities = {line["part"]: line["quantity"] for line in lines}
    return TickedForm(
        request.POST if request.method == "POST" else None,
        parts=[part for part in listed if part.state != "ended"],
        quantities=quantities,
        request=request,
    )


def placed(request: Any, ticks: TickedForm) -> Any:
    """One order, whoever supplies: its name is the supplier's, or all of theirs."""
    wanted = ticks.ordered()
    suppliers = list(dict.fromkeys(part.supplier for part, _ in wanted if part.supplier))
    return place_supply_order(
        by=request.user,
        lines=[OrderedPart(part=part, quantity=count) for part, count in wanted],
        supplier=", ".join(suppliers)[:MOST_SUPPLIER],
        entry_key=ticks.cleaned_data["entry_key"],
        newest=ticks.cleaned_data["newest"],
    )


def count_again(request: Any) -> HttpResponse:
    """Entries came after the count: the worker counts anew, and the page reads what it finds."""
    enqueue("count_use", "Counting what will be used again", {}, request.user)
    messages.success(request, "What will be used is being counted again. Load this page again in a minute.")
    return redirect(f"{reverse('order_list')}?{request.GET.urlencode()}")


def plain(document: Document, lines: list[Document]) -> Document:
    """The lines asked for, without what only the keeping needs."""
    shown = [{name: value for name, value in line.items() if name != "state"} for line in lines]
    return {**document, "lines": shown}
