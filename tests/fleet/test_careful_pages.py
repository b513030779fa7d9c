"""What holds for every address: a look writes nothing, no page elsewhere posts or frames, contacts see no cost."""

from __future__ import annotations

import re
from collections.abc import Iterator
from contextlib import contextmanager
from decimal import Decimal
from typing import Any

import pytest
from django.db import connection
from django.test import Client

from fleet.models import Book, Part, Role
from fleet.rights import PUBLIC
from tests import factories as make
from tests.fleet.rights_world import Place, Route, routes

pytestmark = pytest.mark.django_db
ALL = list(routes())
NOT_WALKED = {"sign_out", "sign_out_everywhere", "health"}
# What a look may write: who is signed in, what was computed, and that it is to be computed in the background.
KEPT_BESIDE = ("django_session", "reliability_keptresult", "fleet_work", "django_tasks", "axes_")
WRITES = ("INSERT", "UPDATE", "DELETE", "REPLACE")
COST = Decimal("7654.32")
WORTH = re.compile(rb"7(?:\xe2\x80\xaf|\xc2\xa0| )?654")  # as files and as pages write it


@pytest.fixture
def place() -> Place:
    return Place()


def signed_in(role: str, **fields: Any) -> Client:
    client = Client()
    client.force_login(make.make_person(role=role))
    return client


def body(reply: Any) -> bytes:
    return b"".join(reply.streaming_content) if reply.streaming else reply.content


@contextmanager
def writes() -> Iterator[list[str]]:
    found: list[str] = []

    def watch(execute: Any, sql: str, *rest: Any) -> Any:
        if sql.lstrip().upper().startswith(WRITES) and not any(name in sql for name in KEPT_BESIDE):
            found.append(sql[:120])
        return execute(sql, *rest)

    with connection.execute_wrapper(watch):
        yield found


def careful(reply: Any, route: Route) -> bool:
    head = reply.headers
    return (
        head.get("X-Frame-Options") == "DENY"
        and "frame-ancestors 'none'" in head.get("Content-Security-Policy", "")
        and head.get("X-Content-Type-Options") == "nosniff"
        and head.get("Referrer-Policy") == "same-origin"
        and ("private" in head.get("Cache-Control", "") or route.right == PUBLIC)
    )


def test_a_look_writes_no_record_and_is_not_framed_sniffed_or_kept_by_a_shared_cache(place: Place) -> None:
    client = signed_in(Role.ADMINISTRATOR)
    Book.load()
    written, careless = {}, {}
    for route in [route for route in ALL if route.name not in NOT_WALKED]:
        for address in place.addresses(route):
            for query in ("", "?as=csv", "?as=json"):
                with writes() as found:
                    reply = client.get(address + query)
                    body(reply)
                if found:
                    written[address + query] = found
                if not careful(reply, route):
                    careless[address + query] = reply.headers
    assert written == {}
    assert careless == {}


def test_no_page_elsewhere_posts_in_somebodys_name(place: Place) -> None:
    client = Client(enforce_csrf_checks=True)
    client.force_login(make.make_person(role=Role.ADMINISTRATOR))
    wrong = []
    for route in ALL:
        for address in place.addresses(route):
            with writes() as found:
                status = client.post(address, {"name": "x"}).status_code
            if found or status not in {403, 405}:
                wrong.append((address, status, found))
    assert wrong == []


def test_contacts_read_no_cost(place: Place) -> None:
    for part in Part.objects.all():
        part.unit_cost = COST
        part.save()
    book = Book.load()
    book.visit_cost = book.stop_cost_per_day = book.bench_hour_cost = COST
    book.save()
    contact, told = make.make_person(role=Role.CONTACT, sites=[place.site]), []
    client, office = Client(), signed_in(Role.MANAGER)
    client.force_login(contact)
    assert WORTH.search(body(office.get("/catalogue/parts/")))
    for route in ALL:
        for address in place.addresses(route):
            for query in ("", "?as=csv", "?as=json", "?q=N"):
                if WORTH.search(body(client.get(address + query))):
                    told.append(address + query)
    assert told == []
