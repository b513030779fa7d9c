"""Whatever stands in an address, the book answers with a page or a refusal in words, never with an error of its own."""

from __future__ import annotations

import re
from collections.abc import Iterator
from urllib.parse import urlencode

import pytest
from django.test import Client

from fleet.models import Role
from fleet.rights import PUBLIC
from tests import factories as make
from tests.fleet.rights_world import Place, Route, routes

pytestmark = pytest.mark.django_db
NASTY = [
    "\0",
    "\ud800",
    "nan",
    "1e400",
    "9" * 40,
    "9223372036854775808",
    "-1",
    "1e308",
    "0001-01-01",
    "9999-12-31",
    "x" * 5000,
    "٣",
    "'\"<script>",
    "-",
]
WORST = ["\0"]  # the one that an engine itself refuses, where no form did before it
# Read from the address by hand, besides what the forms of a page name.
BY_HAND = {"as", "component", "condition", "group", "line", "module", "next", "page", "part", "q", "reason", "sort"}
ASKING = re.compile(r'<form[^>]*method="get".*?</form>', re.DOTALL)
NAMED = re.compile(r'<(?:input|select|textarea)[^>]*? name="([^"]+)"')
NO_PAGE = {"sign_out", "sign_out_everywhere"}


def queries(asked: set[str]) -> Iterator[str]:
    """All names at once with each value, each name twice and as a list; where a form asks, each alone with the worst.

    A form that is refused keeps the rest from being read, so there each name is tried alone as well.
    """
    names = asked | BY_HAND
    for value in NASTY:
        yield encoded([(name, value) for name in sorted(names)])
    yield encoded([pair for name in sorted(names) for pair in ((name, "a"), (name, "b"), (f"{name}[]", "c"))])
    for name in sorted(names if asked > {"q"} else ()):
        for value in WORST:
            yield encoded([(name, value)])


def encoded(pairs: list[tuple[str, str]]) -> str:
    return urlencode(pairs, errors="surrogatepass")


def names_on(client: Client, address: str) -> set[str]:
    page = client.get(address)
    if page.streaming or page.status_code not in {200, 422}:
        return set()
    forms = "".join(ASKING.findall(page.content.decode()))
    return set(NAMED.findall(forms))


ASKED = [each for each in routes() if each.name not in NO_PAGE]


@pytest.mark.parametrize("route", ASKED, ids=lambda each: each.pattern)
def test_nothing_in_an_address_breaks_a_page(route: Route) -> None:
    place = Place()
    person, client = make.make_person(role=Role.MANAGER), Client(raise_request_exception=False)
    if route.right != PUBLIC:
        client.force_login(person)
    address = next(iter(place.addresses(route)))
    broken = []
    for query in queries(names_on(client, address)):
        reply = client.get(f"{address}?{query}")
        if reply.streaming:
            b"".join(reply.streaming_content)
        if reply.status_code >= 500:
            broken.append(f"{query[:120]}: {getattr(reply, 'exc_info', ['', ''])[1]!r:.200}")
    assert broken == []
