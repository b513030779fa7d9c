"""People: who signs in, with which role, on which sites; reset links; signing out from afar."""

from __future__ import annotations

from typing import Any

from django.contrib import messages
from django.db.models import Count
from django.http import HttpResponse
from django.shortcuts import get_object_or_404, redirect, render
from django.urls import reverse
from django.views.decorators.http import require_POST

from fleet.actions.errors import RecordError
from fleet.forms.filters import PersonFilter
from fleet.forms.people import BookForm, PersonForm
from fleet.models import Book, Person
from fleet.reset_links import reset_path
from fleet.rights import PEOPLE, may_manage, needs
from fleet.views.listing import Column, Listing
from fleet.views.saving import save_form

CRUMBS = [{"name": "People", "url": "/people/"}]
LIST = Listing(
    columns=[
        Column(
            "person",
            "Person",
            lambda person: {
                "text": person.name,
                "url": reverse("edit_person", args=[person.code]),
            },
            sort=("name", "code_order"),
        ),
        Column("code", "Code", lambda person: person.code, sort=("code_order",)),
        Column("role", "Role", lambda person: person.role, sort=("role",)),
        Column(
            "sites",
            "Sites",
            lambda person: "all" if person.all_sites else person.site_count,
            sort=("all_sites", "site_count"),
        ),
        Column("active", "May sign in", lambda person: person.is_active, sort=("is_active",)),
        Column("last", "Last signed in", lambda person: person.last_login, sort=("last_login",), numeric=True),
    ],
    what="people",
    caption="People",
    sort="person",
)


@needs(PEOPLE)
def people(request: Any) -> HttpResponse:
    rows = request.seen(Person).annotate(site_count=Count("sites"))
    actions = [{"name": "Add a person", "url": reverse("new_person")}]
    return LIST.answer(request, rows, PersonFilter, title="People", actions=actions)


@needs(PEOPLE)
def new_person(request: Any) -> HttpResponse:
    return save_form(
        request,
        PersonForm,
        None,
        title="A new person",
        back="edit_person",
        crumbs=CRUMBS,
        notes=["After storing, make a link on the person's page and hand it over: they choose their own password."],
    )


@needs(PEOPLE)
def edit_person(request: Any, code: str) -> HttpResponse:
    person = get_object_or_404(request.seen(Person), code=code.upper())
    return save_form(
        request,
        PersonForm,
        person,
        title=person.name,
        back="edit_person",
        crumbs=CRUMBS,
        template="people/person.html",
        person=person,
        may_link=may_manage(request.user, person),
    )


@needs(PEOPLE)
@require_POST
def make_reset_link(request: Any, code: str) -> HttpResponse:
    """Shows the link once, to be handed over without mail; it works once and for three days."""
    person = get_object_or_404(request.seen(Person), code=code.upper())
    if not may_manage(request.user, person):
        messages.error(request, f"{person.name} may do or see more than you. Ask an administrator for the link.")
        return redirect("edit_person", code=person.code)
    link = request.build_absolute_uri(reset_path(person))
    return render(request, "people/reset_link.html", {"person": person, "link": link, "crumbs": CRUMBS})


@needs(PEOPLE)
@require_POST
def sign_out_everywhere(request: Any, code: str) -> HttpResponse:
    from fleet.actions.sign_out_everywhere import sign_out_everywhere as sign_out

    person = get_object_or_404(request.seen(Person), code=code.upper())
    try:
        sign_out(by=request.user, person=person)
    except RecordError as error:
        messages.error(request, error.message)
    else:
        messages.success(request, f"{person.name} is signed out on every device.")
    return redirect("edit_person", code=person.code)


@needs(PEOPLE)
def book(request: Any) -> HttpResponse:
    return save_form(
        request, BookForm, Book.load(), title="Book settings", back="book", back_args=[], template="list/edit.html"
    )
