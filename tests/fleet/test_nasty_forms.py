"""Whatever is typed into a form or sent in its name, the book answers with a page or a refusal, never with an error.

Each form is filled in as it is shown, then all of its fields at once get what no form asks for. With HALFNUT_EXPLORE=1
each field alone as well, among sound ones, and as every role: half an hour. What a form would have stored is taken back
after each try, so that every try meets the same records.
"""

from __future__ import annotations

import os
from collections.abc import Iterator
from html.parser import HTMLParser
from typing import Any
from urllib.parse import urljoin

import pytest
from django.db import transaction
from django.test import Client

from fleet.models import Person, Role
from fleet.rights import HOLDERS, PUBLIC
from tests import factories as make
from tests.fleet.rights_world import Place, Route, routes

pytestmark = pytest.mark.django_db
WORST = ["\0", "9999-12-31", "9" * 40, "‮٣​"]
NASTY = [
    *WORST,
    "",
    "\ud800",
    "nan",
    "Infinity",
    "1e309",
    "1e308",
    "-1",
    "0",
    "9223372036854775808",
    "2147483648",
    "99999999.99",
    "0001-01-01",
    "1900-01-01",
    "9999-12-31T23:59",
    "0001-01-01T00:00",
    "23:59:60",
    "x" * 5000,
    "'\"<script>",
    "=1+1",
    "-",
    "A" * 41,
]
WIDE = bool(os.environ.get("HALFNUT_EXPLORE"))
NO_PAGE = {"sign_out", "sign_out_everywhere", "change_password", "reset_password", "sign_in"}
Pairs = list[tuple[str, str]]


class Forms(HTMLParser):
    """The forms of a page that are posted: where to, and what their controls hold."""

    def __init__(self, page: str, address: str) -> None:
        super().__init__()
        self.address, self.forms, self.form = address, [], None
        self.select = self.area = ""
        self.chosen: str | None = None
        self.forms: list[tuple[str, Pairs]]
        self.feed(page)

    def handle_starttag(self, tag: str, attrs: Any) -> None:
        said = dict(attrs)
        if tag == "form" and said.get("method", "get").lower() == "post":
            self.form = (urljoin(self.address, said.get("action") or ""), [])
            self.forms.append(self.form)
        if self.form is None:
            return
        name = said.get("name") or ""
        if tag == "input" and name and name != "csrfmiddlewaretoken":
            if said.get("type") in {"checkbox", "radio"} and "checked" not in said and said["type"] == "radio":
                return
            self.form[1].append((name, said.get("value") or ""))
        elif tag == "select":
            self.select, self.chosen = name, None
        elif tag == "option" and self.select and (self.chosen in (None, "") or "selected" in said):
            self.chosen = said.get("value") or ""
        elif tag == "textarea":
            self.area = name
        elif tag == "button" and name:
            self.form[1].append((name, said.get("value") or ""))

    def handle_endtag(self, tag: str) -> None:
        if tag == "form":
            self.form = None
        elif tag == "select" and self.form is not None and self.select:
            self.form[1].append((self.select, self.chosen or ""))
            self.select = ""
        elif tag == "textarea" and self.form is not None and self.area:
            self.form[1].append((self.area, "a word"))
            self.area = ""


def tries(pairs: Pairs) -> Iterator[Pairs]:
    """As shown, and empty; all fields at once with each value; each field alone, missing, and twice."""
    yield pairs
    yield []
    names = list(dict.fromkeys(name for name, _ in pairs))
    for value in NASTY if WIDE else WORST:
        yield [(name, value) for name in names]
    for name in names if WIDE else ():
        others = [pair for pair in pairs if pair[0] != name]
        yield others
        for value in NASTY:
            yield [*others, (name, value)]
        yield [*pairs, (name, "a"), (name, "b")]


def posted(client: Client, address: str, pairs: Pairs) -> str:
    """What went wrong, if anything did."""
    data: dict[str, list[str]] = {}
    for name, value in pairs:
        data.setdefault(name, []).append(value)
    with transaction.atomic():
        try:
            reply = client.post(address, data)
        except UnicodeEncodeError:  # the test's own client cannot send it
            return ""
        finally:
            transaction.set_rollback(True)
    if reply.status_code < 500:
        return ""
    error = getattr(reply, "exc_info", ["", ""])[1]
    told = [(name, value[:40]) for name, value in pairs]
    return f"{address} {told}: {error!r:.300}"


def people_of(route: Route, place: Place) -> Iterator[Person]:
    roles = [role for role in Role.values if route.right in {PUBLIC} or role in HOLDERS[route.right or ""]]
    for role in roles if WIDE else roles[:1]:
        yield make.make_person(role=role)


ASKED = [each for each in routes() if each.name not in NO_PAGE]


@pytest.mark.parametrize("route", ASKED, ids=lambda each: each.pattern)
def test_nothing_in_a_form_breaks_a_page(route: Route) -> None:
    place = Place()
    broken = []
    for person in people_of(route, place):
        client = Client(raise_request_exception=False)
        client.force_login(person)
        for address in place.addresses(route):
            page = client.get(address)
            shown = "" if page.streaming or page.status_code >= 400 else page.content.decode()
            own = [(to, pairs) for to, pairs in Forms(shown, address).forms if "sign-out" not in to]
            for to, pairs in own or [(address, [])]:
                for attempt in tries(pairs):
                    broken.append(posted(client, to, attempt))
    assert [words for words in broken if words] == []
