"""The catalogue: components with their failure modes, module types with their positions, parts."""

from __future__ import annotations

from typing import Any

from django.db.models import Count
from django.http import HttpResponse
from django.shortcuts import get_object_or_404, render
from django.urls import reverse

from fleet.forms.catalogue import ComponentForm, ModeForm, PartForm, PositionForm, TypeForm
from fleet.forms.filters import PartFilter
from fleet.models import Component, FailureMode, ModuleType, Part, Position
from fleet.rights import CATALOGUE, needs
from fleet.views.listing import Column, Listing
from fleet.views.saving import save_form

CRUMBS = [{"name": "Catalogue", "url": "/catalogue/"}]

PARTS = Listing(
    columns=[
        Column(
            "part",
            "Part",
            lambda part: {"text": part.code, "url": reverse("edit_part", args=[part.code]), "sub": part.name},
            plain=lambda part: part.code,
            sort=("code_order",),
        ),
        Column("component", "Component", lambda part: part.component.title, sort=("component__code_order",)),
        Column("revision", "Revision", lambda part: part.revision, sort=("revision",)),
        Column("supersedes", "Supersedes", lambda part: part.supersedes and part.supersedes.code),
        Column("state", "State", lambda part: part.state, sort=("state",)),
        Column("supplier", "Supplier", lambda part: part.supplier, sort=("supplier",)),
        Column("cost", "Unit cost", lambda part: part.unit_cost, sort=("unit_cost",), numeric=True),
        Column("lead", "Lead time, days", lambda part: part.lead_time_days, sort=("lead_time_days",), numeric=True),
        Column("pack", "Pack", lambda part: part.pack, sort=("pack",), numeric=True),
    ],
    what="parts",
    caption="Parts",
    sort="part",
    empty_state="No parts yet.",
    empty_remedy="Add the first one, or bring in parts.csv.",
)


@needs(CATALOGUE)
def catalogue(request: Any) -> HttpResponse:
    components = request.seen(Component).annotate(
        mode_count=Count("modes", distinct=True), part_count=Count("parts", distinct=True)
    )
    types = request.seen(ModuleType).annotate(
        position_count=Count("positions", distinct=True), module_count=Count("modules", distinct=True)
    )
    return render(request, "catalogue/page.html", {"components": components, "types": types})


@needs(CATALOGUE)
def parts(request: Any) -> HttpResponse:
    rows = request.seen(Part).select_related("component", "supersedes")
    actions = [{"name": "Add a part", "url": reverse("new_part")}]
    return PARTS.answer(request, rows, PartFilter, title="Parts", actions=actions, crumbs=CRUMBS)


@needs(CATALOGUE)
def new_part(request: Any) -> HttpResponse:
    return save_form(request, PartForm, None, title="A new part", back="edit_part", crumbs=CRUMBS)


@needs(CATALOGUE)
def edit_part(request: Any, code: str) -> HttpResponse:
    part = get_object_or_404(request.seen(Part), code=code.upper())
    return save_form(request, PartForm, part, title=f"Part {part}", back="edit_part", crumbs=CRUMBS)


@needs(CATALOGUE)
def component(request: Any, code: str) -> HttpResponse:
    record = get_object_or_404(request.seen(Component), code=code.upper())
    modes = request.seen(FailureMode).filter(component=record)
    context = {"component": record, "modes": modes, "crumbs": CRUMBS}
    return render(request, "catalogue/component.html", context)


@needs(CATALOGUE)
def new_component(request: Any) -> HttpResponse:
    return save_form(request, ComponentForm, None, title="A new component", back="component", crumbs=CRUMBS)


@needs(CATALOGUE)
def edit_component(request: Any, code: str) -> HttpResponse:
    record = get_object_or_404(request.seen(Component), code=code.upper())
    return save_form(request, ComponentForm, record, title=f"Change {record.title}", back="component", crumbs=CRUMBS)


def _mode_form(request: Any, owner: Component, record: FailureMode | None) -> HttpResponse:
    crumbs = [*CRUMBS, {"name": owner.title, "url": reverse("component", args=[owner.code])}]
    bound = type("BoundModeForm", (ModeForm,), {"component": owner})
    title = f"Change {record.title}" if record else f"A new failure mode of the {owner.title}"
    return save_form(request, bound, record, title=title, back="component", back_args=[owner.code], crumbs=crumbs)


@needs(CATALOGUE)
def new_mode(request: Any, code: str) -> HttpResponse:
    return _mode_form(request, get_object_or_404(request.seen(Component), code=code.upper()), None)


@needs(CATALOGUE)
def edit_mode(request: Any, code: str, mode: str) -> HttpResponse:
    owner = get_object_or_404(request.seen(Component), code=code.upper())
    record = get_object_or_404(request.seen(FailureMode), component=owner, code=mode.upper())
    return _mode_form(request, owner, record)


@needs(CATALOGUE)
def module_type(request: Any, code: str) -> HttpResponse:
    record = get_object_or_404(request.seen(ModuleType), code=code.upper())
    positions = request.seen(Position).filter(type=record).select_related("component")
    return render(request, "catalogue/type.html", {"type": record, "positions": positions, "crumbs": CRUMBS})


@needs(CATALOGUE)
def new_type(request: Any) -> HttpResponse:
    return save_form(request, TypeForm, None, title="A new module type", back="type", crumbs=CRUMBS)


@needs(CATALOGUE)
def edit_type(request: Any, code: str) -> HttpResponse:
    record = get_object_or_404(request.seen(ModuleType), code=code.upper())
    return save_form(request, TypeForm, record, title=f"Change {record.title}", back="type", crumbs=CRUMBS)


def _position_form(request: Any, owner: ModuleType, record: Position | None) -> HttpResponse:
    crumbs = [*CRUMBS, {"name": owner.title, "url": reverse("type", args=[owner.code])}]
    bound = type("BoundPositionForm", (PositionForm,), {"type": owner})
    title = f"Change position {record}" if record else f"A new position of {owner.title}"
    return save_form(request, bound, record, title=title, back="type", back_args=[owner.code], crumbs=crumbs)


@needs(CATALOGUE)
def new_position(request: Any, code: str) -> HttpResponse:
    return _position_form(request, get_object_or_404(request.seen(ModuleType), code=code.upper()), None)


@needs(CATALOGUE)
def edit_position(request: Any, code: str, position: str) -> HttpResponse:
    owner = get_object_or_404(request.seen(ModuleType), code=code.upper())
    record = get_object_or_404(request.seen(Position), type=owner, code=position.upper())
    return _position_form(request, owner, record)
