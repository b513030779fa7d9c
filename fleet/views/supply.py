"""Supply orders: their lines, one order with its deliveries, and how long deliveries took so far."""

from __future__ import annotations

from typing import Any

from django.contrib import messages
from django.http import Http404, HttpResponse
from django.shortcuts import get_object_or_404, redirect, render
from django.urls import reverse
from django.utils import timezone
from django.views.decorators.cache import never_cache

from fleet.actions.change_supply_line import cancel_supply_line, change_supply_line
from fleet.actions.errors import RecordError
from fleet.actions.place_supply_order import place_supply_order
from fleet.actions.receive_stock import receive_delivery
from fleet.formats import counted, long_day, number
from fleet.forms.errors import add_record_error
from fleet.forms.stock_filters import DeliveryFilter, SupplyFilter
from fleet.forms.supply import CallOffForm, DeliveryForm, LineForm, OrderSheet
from fleet.models import Book, Part, SiteKind, StockMove, Store, SupplyLine, SupplyOrder
from fleet.rights import STOCK, needs
from fleet.stock import days_of, lead_times
from fleet.views.listing import Column, Listing

CRUMBS = [{"name": "Stores", "url": "/stores/"}]
IN_ORDERS = [*CRUMBS, {"name": "Supply orders", "url": "/supply/"}]


def order_cell(line: Any) -> dict[str, Any]:
    return {"text": line.order.code, "url": reverse("supply_order", args=[line.order.code])}


def is_late(line: Any) -> bool:
    return line.due > 0 and line.due_on is not None and line.due_on < timezone.localdate()


def due_on_cell(line: Any) -> Any:
    return {"text": line.due_on, "kind": "late", "sub": "overdue"} if is_late(line) else line.due_on


LINES = Listing(
    columns=[
        Column("order", "Order", order_cell, plain=lambda line: line.order.code, sort=("order__code_order",)),
        Column("part", "Part", lambda line: {"text": line.part.code, "sub": line.part.name},
               plain=lambda line: line.part.code, sort=("part__code_order",)),
        Column("supplier", "Supplier", lambda line: line.order.supplier, sort=("order__supplier",)),
        Column("ordered_on", "Ordered on", lambda line: line.order.ordered_on, sort=("order__ordered_on",),
               numeric=True),
        Column("quantity", "Ordered", lambda line: line.quantity, sort=("quantity",), numeric=True),
        Column("received", "Came", lambda line: line.received, sort=("received",), numeric=True),
        Column("due", "Still to come", lambda line: line.due if line.due > 0 else "–",
               plain=lambda line: max(0, line.due), sort=("due",), numeric=True),
        Column("due_on", "Due on", due_on_cell, plain=lambda line: line.due_on, sort=("due_on",),
               numeric=True),
    ],
    what="order lines",
    caption="Supply orders",
    sort="due_on",
    empty_state="Nothing is on its way.",
    empty_remedy="Order parts, or choose “all lines” to see what came.",
)  # fmt: skip


@needs(STOCK)
def supply(request: Any) -> HttpResponse:
    rows = request.seen(SupplyLine).standing().with_received().select_related("order", "part")
    actions = [
        {"name": "Order parts", "url": reverse("new_supply_order")},
        {"name": "Lead times so far", "url": reverse("deliveries"), "quiet": True},
    ]
    context = {"title": "Supply orders", "lead": supply_sentence(rows), "actions": actions, "crumbs": CRUMBS}
    return LINES.answer(request, rows, SupplyFilter, **context)


def supply_sentence(lines: Any) -> str:
    coming = lines.filter(due__gt=0)
    count = coming.count()
    if not count:
        return "Nothing is on its way."
    late = coming.filter(due_on__lt=timezone.localdate()).count()
    overdue = f"; {number(late)} of them overdue" if late else "; none is overdue"
    return f"{counted(count, 'order line is', 'order lines are')} still to come{overdue}."


def late_cell(move: Any) -> Any:
    late = days_of(move.late)
    if late is None:
        return "–"
    return (
        {"text": f"{number(late)} late", "kind": "late"}
        if late > 0
        else (f"{number(-late)} early" if late else "on the day")
    )


DELIVERIES = Listing(
    columns=[
        Column("part", "Part", lambda move: {"text": move.part.code, "sub": move.part.name},
               plain=lambda move: move.part.code, sort=("part__code_order",)),
        Column("supplier", "Supplier", lambda move: move.line.order.supplier, sort=("line__order__supplier",)),
        Column("order", "Order", lambda move: order_cell(move.line), plain=lambda move: move.line.order.code,
               sort=("line__order__code_order",)),
        Column("ordered_on", "Ordered on", lambda move: move.line.order.ordered_on, sort=("line__order__ordered_on",),
               numeric=True),
        Column("received_on", "Came on", lambda move: move.happened_on, sort=("happened_on",), numeric=True),
        Column("quantity", "Pieces", lambda move: move.quantity, sort=("quantity",), numeric=True),
        Column("took", "Days it took", lambda move: days_of(move.took), sort=("took",), numeric=True),
        Column("late", "Days late", late_cell, plain=lambda move: days_of(move.late), sort=("late",), numeric=True),
        Column("expected", "Lead time of the part", lambda move: move.part.lead_time_days, numeric=True),
    ],
    what="deliveries",
    caption="Deliveries so far",
    sort="-received_on",
    empty_state="No delivery came against an order yet.",
    empty_remedy="Receive one on its order’s page.",
)  # fmt: skip


@needs(STOCK)
def deliveries(request: Any) -> HttpResponse:
    rows = lead_times(request.seen(StockMove)).select_related("part", "line__order")
    context = {"title": "Lead times so far", "lead": lead_sentence(rows), "crumbs": IN_ORDERS}
    return DELIVERIES.answer(request, rows, DeliveryFilter, **context)


def lead_sentence(rows: Any) -> str:
    """What was seen, no estimate."""
    took = sorted(days_of(each) or 0 for each in rows.values_list("took", flat=True))
    if not took:
        return "No delivery came against an order yet."
    middle = took[len(took) // 2]
    span = f"from {number(took[0])} to {number(took[-1])} days" if took[0] != took[-1] else f"{number(middle)} days"
    return f"{counted(len(took), 'delivery', 'deliveries')} so far took {span}, half of them {number(middle)} or fewer."


@needs(STOCK)
@never_cache
def new_supply_order(request: Any) -> HttpResponse:
    """`?line=N2:40&line=S1:10` fills lines beforehand."""
    asked = [tuple(each[:60].partition(":")[::2]) for each in request.GET.getlist("line")[:50]]
    parts = request.seen(Part).exclude(state="ended").order_by("code_order")
    data, newest = request.POST if request.method == "POST" else None, request.seen(SupplyLine).newest()
    sheet = OrderSheet(parts, data, asked, newest)  # type: ignore[arg-type]
    if request.method == "POST" and sheet.is_valid():
        try:
            order = place_supply_order(by=request.user, **sheet.ordered())
        except RecordError as error:
            row = error.data.get("row")
            add_record_error(sheet.order if row is None else sheet.filled()[row], error)  # type: ignore[arg-type]
        else:
            messages.success(request, f"Order {order.code} is placed: {counted(order.lines.count(), 'line')}.")
            return redirect("supply_order", code=order.code)
    context = {"sheet": sheet, "crumbs": IN_ORDERS}
    return render(request, "supply/new.html", context, status=422 if request.method == "POST" else 200)


def seen_order(request: Any, code: str) -> SupplyOrder:
    return get_object_or_404(request.seen(SupplyOrder), code=code.upper())


@needs(STOCK)
@never_cache
def supply_order(request: Any, code: str) -> HttpResponse:
    """An order with its lines; a POST is a delivery."""
    order = seen_order(request, code)
    lines = list(
        request.seen(SupplyLine).standing().with_received().filter(order=order).select_related("part").order_by(
            "part__code_order")
    )  # fmt: skip
    coming = [line for line in lines if line.due > 0]
    stores = sorted(request.seen(Store).select_related("site").order_by("code_order"), key=shelves_first)
    form = DeliveryForm(request.POST if request.method == "POST" else None, lines=coming, stores=stores)
    if request.method == "POST" and form.is_valid():
        try:
            moves = receive_delivery(by=request.user, **form.sent())
        except RecordError as error:
            if "line" in error.data:
                error.field = f"line_{error.data['line']}"
            add_record_error(form, error)
        else:
            pieces = sum(move.quantity for move in moves)
            messages.success(request, f"{counted(pieces, 'piece')} received at {moves[0].store.title}.")
            return redirect("supply_order", code=order.code)
    context = {
        "order": order,
        "lead": order_sentence(lines),
        "lines": [{"line": line, "late": is_late(line)} for line in lines],
        "coming": bool(coming),
        "form": form,
        "stores": bool(stores),
        "receipts": request.seen(StockMove).filter(line__order=order).select_related("part", "store", "entered_by"),
        "currency": Book.load().currency,
        "crumbs": IN_ORDERS,
    }
    return render(request, "supply/order.html", context, status=422 if form.is_bound else 200)


def shelves_first(store: Store) -> tuple[bool, bool]:
    """Deliveries go to a depot, seldom to a box at a site or into a van."""
    return (store.person_id is not None, store.site is None or store.site.kind != SiteKind.DEPOT)


def order_sentence(lines: list[Any]) -> str:
    if not lines:
        return "Every line of this order was called off."
    due = sum(max(0, line.due) for line in lines)
    if not due:
        return "All of it came."
    days = [line.due_on for line in lines if line.due > 0 and line.due_on is not None]
    until = f", the last by {long_day(max(days))}" if days else ""
    late = sum(is_late(line) for line in lines)
    overdue = f" {counted(late, 'line is', 'lines are')} overdue." if late else ""
    return f"{counted(due, 'piece')} still to come{until}.{overdue}"


def seen_line(request: Any, code: str, part: str) -> tuple[SupplyOrder, SupplyLine]:
    order = seen_order(request, code)
    lines = request.seen(SupplyLine).standing().filter(order=order, part__code=part.upper())
    line = lines.select_related("part").first()
    if line is None:
        raise Http404
    line.order = order
    return order, line


def line_page(
    request: Any, order: SupplyOrder, line: SupplyLine, form: Any, *, title: str, submit: str
) -> HttpResponse:
    context = {
        "title": title,
        "sub": f"{line.part.title}, order {order.code}",
        "form": form,
        "submit": submit,
        "crumbs": [*IN_ORDERS, {"name": order.code, "url": reverse("supply_order", args=[order.code])}],
        "cancel_url": reverse("supply_order", args=[order.code]),
    }
    return render(request, "list/edit.html", context, status=422 if form.is_bound else 200)


@needs(STOCK)
def change_line(request: Any, code: str, part: str) -> HttpResponse:
    order, line = seen_line(request, code, part)
    opened: dict[str, Any] = {
        "version": line.version, "quantity": line.quantity, "due_on": line.due_on, "unit_cost": line.unit_cost,
    }  # fmt: skip
    form = LineForm(request.POST if request.method == "POST" else None, initial=opened)
    if request.method == "POST" and form.is_valid():
        try:
            change_supply_line(by=request.user, line=line, **form.cleaned_data)
        except RecordError as error:
            add_record_error(form, error)
        else:
            messages.success(request, f"{line.part.code} on order {order.code} is changed.")
            return redirect("supply_order", code=order.code)
    return line_page(request, order, line, form, title="Change an order line", submit="Store the change")


@needs(STOCK)
def call_off_line(request: Any, code: str, part: str) -> HttpResponse:
    order, line = seen_line(request, code, part)
    form = CallOffForm(request.POST if request.method == "POST" else None, initial={"version": line.version})
    if request.method == "POST" and form.is_valid():
        try:
            cancel_supply_line(by=request.user, line=line, **form.cleaned_data)
        except RecordError as error:
            add_record_error(form, error)
        else:
            messages.success(request, f"Nothing more of {line.part.code} comes on order {order.code}.")
            return redirect("supply_order", code=order.code)
    return line_page(request, order, line, form, title="Call off what is still to come", submit="Call it off")
