"""The rows behind one line of “what was left out”: fittings, or rows of an imported set."""

from __future__ import annotations

from typing import Any

from django.db.models import Q
from django.http import Http404, HttpResponse, StreamingHttpResponse
from django.urls import reverse

from fleet.formats import long_day
from fleet.models import Component, Fitting, SetLife
from fleet.rights import LIFE, needs
from fleet.views.listing import Column, Listing
from reliability.forms.life import Choices, LifeForm
from reliability.views.life import address, chosen_component, own_sites

LEFT_OUT = Listing(
    columns=[
        Column(
            "module",
            "Module",
            lambda fitting: {"text": fitting.module.code, "url": reverse("module", args=[fitting.module.code])},
            plain=lambda fitting: fitting.module.code,
            sort=("module__code_order",),
        ),
        Column("position", "Position", lambda fitting: fitting.position.code, sort=("position__code_order",)),
        Column("part", "Part", lambda fitting: fitting.part.code, sort=("part__code_order",)),
        Column("fitted", "Fitted", lambda fitting: fitting.fitted_on, sort=("fitted_on",)),
        Column("removed", "Removed", lambda fitting: fitting.removed_on, sort=("removed_on",)),
        Column("why", "Reason of removal", lambda fitting: fitting.reason, sort=("reason",)),
        Column("struck", "Struck out", lambda fitting: fitting.struck_out),
    ],
    what="fittings left out",
    caption="Fittings that are in no figure of the Life screen",
    sort="module",
    empty_state="No fitting of your sites is left out for this reason.",
)
SET_ROWS = Listing(
    columns=[
        Column("age", "Age", lambda life: life.age, sort=("age",), numeric=True),
        Column("failed", "Failed", lambda life: "yes" if life.observed else "no", sort=("observed",)),
        Column("entry", "Entered at", lambda life: life.entry_age, sort=("entry_age",), numeric=True),
        Column("clock", "Counted in", lambda life: life.clock, sort=("clock",)),
        Column("part", "Part", lambda life: life.part.code if life.part else None, sort=("part__code_order",)),
        Column("site", "Site", lambda life: life.site, sort=("site",)),
        Column("count", "Equal lives", lambda life: life.count, sort=("count",), numeric=True),
    ],
    what="lives left out",
    caption="Imported lives that are in no figure of the Life screen",
    sort="age",
    empty_state="No imported life of your sites is left out for this reason.",
)


@needs(LIFE)
def life_left_out(request: Any) -> HttpResponse | StreamingHttpResponse:
    from reliability.lifetimes_from_fleet import lives

    components = list(request.seen(Component))
    component = chosen_component(request, components) if components else None
    choices = Choices.seen(request, components, component)
    form = LifeForm(request.GET, choices=choices)
    if component is None or not form.is_valid():
        raise Http404
    question = {name: value for name, value in form.question().items() if name not in ("confidence", "by")}
    reason = request.GET.get("reason", "")
    found = next((row for row in lives(component, **question).left_out if row.reason == reason), None)
    if found is None:
        raise Http404
    listing, rows = LEFT_OUT, request.seen(Fitting)
    if question["life_set"]:
        listing, rows = SET_ROWS, request.seen(SetLife)
    rows = rows.filter(pk__in=found.query.values("pk"))
    return listing.answer(
        request,
        with_names(rows, own_sites(request, choices), imported=bool(question["life_set"])),
        title=f"Left out: {reason}",
        lead=f"{component.title}, from the records of {long_day(question['as_of'])}.",
        crumbs=[{"name": "Life", "url": reverse("life") + address(request, reason="", page="")}],
    )


def with_names(rows: Any, mine: set[str] | None, *, imported: bool) -> Any:
    if not imported:
        return rows.select_related("module", "position", "part")
    if mine is not None:
        rows = rows.filter(Q(site="") | Q(site__in=mine))
    return rows.select_related("part")
