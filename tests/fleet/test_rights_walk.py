"""Every address of the site map, as every role, on records of a site that is theirs and of one that is not."""

from __future__ import annotations

import pytest
from django.test import Client

from fleet.models import Person, Role
from fleet.rights import HOLDERS, PUBLIC
from tests.fleet.rights_world import WHO, Place, Route, make_who, routes

pytestmark = pytest.mark.django_db
# Addresses whose object is the catalogue's, a person or a work: not bound to a site.
NOT_OF_A_SITE = (
    "catalogue/",
    "people/",
    "work/",
    "password/",
    "redesigns/",
    "forecast/planned-replacement/",
    "supply/",
)
FINE = {200, 302, 304, 405, 422}
ALL = list(routes())


@pytest.fixture
def mine() -> Place:
    return Place()


@pytest.fixture
def other() -> Place:
    return Place()


def signed_in(who: str, place: Place) -> tuple[Person, Client]:
    person, client = make_who(who, place), Client()
    client.force_login(person)
    return person, client


def of_a_site(route: Route) -> bool:
    return bool(route.names) and not route.pattern.startswith(NOT_OF_A_SITE)


def signed_out(route: Route) -> bool:
    """Signing out and ending all sessions would end the walk."""
    return route.name in {"sign_out", "sign_out_everywhere", "change_password"}


def test_every_view_names_its_right() -> None:
    unnamed = [route.pattern for route in ALL if route.right is None]
    assert unnamed == [], "Put @needs(…) on these views: the middleware refuses them to everybody until then."


def test_a_stranger_is_sent_to_sign_in(mine: Place) -> None:
    client = Client()
    for route in ALL:
        if route.right == PUBLIC:
            continue
        for address in mine.addresses(route):
            for method in ("get", "post"):
                reply = getattr(client, method)(address)
                assert reply.status_code == 302, f"{method} {address}"
                assert reply["Location"].startswith("/sign-in/"), f"{method} {address}"


@pytest.mark.parametrize("who", WHO)
def test_each_role_meets_its_rights(who: str, mine: Place, other: Place) -> None:
    person, client = signed_in(who, mine)
    wrong = []
    for route in ALL:
        if route.right == PUBLIC or signed_out(route):
            continue
        holds = person.role in HOLDERS[route.right]
        for place in places(person, route, mine, other, holds=holds):
            expected = statuses(person, route, holds=holds, at_home=place is mine)
            for address in place.addresses(route):
                for method in ("get", "post"):
                    status = getattr(client, method)(address).status_code
                    if status not in expected:
                        wrong.append(f"{method} {address}: {status}, not one of {sorted(expected)}")
    assert wrong == []


def places(person: Person, route: Route, mine: Place, other: Place, *, holds: bool) -> tuple[Place, ...]:
    """Where to try: elsewhere only if it makes a difference."""
    return (mine, other) if holds and of_a_site(route) and not person.all_sites else (mine,)


def statuses(person: Person, route: Route, *, holds: bool, at_home: bool) -> set[int]:
    """What a page may answer."""
    if not holds:
        return {403}
    if not of_a_site(route):
        return FINE | {404}  # a work of somebody else's is not there for them
    if person.role == Role.BENCH:  # they see depots only, and neither place is one
        return {404, 405}
    if at_home or person.all_sites:
        return FINE | ({403} if person.role == Role.CREW else set())  # not their own entry of the day
    return {404, 405}


@pytest.mark.parametrize("who", [who for who in WHO if "all" not in who])
def test_pages_show_only_own_sites(who: str, mine: Place, other: Place) -> None:
    """No page that a person of one site may open names the other site or its module."""
    person, client = signed_in(who, mine)
    for route in ALL:
        if route.right == PUBLIC or person.role not in HOLDERS[route.right] or route.pattern.startswith("people/"):
            continue
        queries = ("", "?q=WEIR", "?as=csv") if not route.names else ("",)
        for address in mine.addresses(route):
            for query in queries:
                reply = client.get(address + query)
                body = b"".join(reply.streaming_content) if reply.streaming else reply.content
                assert other.site.code.encode() not in body, f"{address}{query} names another site"
                assert other.module.code.encode() + b"<" not in body, f"{address}{query} names another's module"
