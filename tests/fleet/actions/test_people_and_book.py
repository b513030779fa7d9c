"""People, their sign-ins and the settings of the book: for managers."""

from __future__ import annotations

from decimal import Decimal
from typing import Any

import pytest

from fleet.actions.errors import BadValue, ChangedSince, NotAllowed
from fleet.actions.save_book import save_book
from fleet.actions.save_person import save_person
from fleet.actions.sign_out_everywhere import sign_out_everywhere
from fleet.models import Book, DataVersion, Person
from tests.factories import Carriage, make_manager, make_person, make_site

pytestmark = pytest.mark.django_db


@pytest.fixture
def mona() -> Person:
    return make_manager(name="Mona")


def test_a_new_person_gets_sites_and_chooses_a_password_later(mona: Person) -> None:
    weir = make_site()
    rosa = save_person(by=mona, code="rosa", name="Rosa", role="crew", all_sites=False, sites=[weir], is_active=True)
    assert (rosa.code, list(rosa.sites.all())) == ("ROSA", [weir])
    assert not rosa.has_usable_password()
    rosa = save_person(by=mona, person=rosa, version=1, sites=[])
    assert (rosa.sites.count(), rosa.version) == (0, 2)


def test_who_may_not_sign_in_any_more_is_signed_out(mona: Person) -> None:
    rosa = make_person(role="crew")
    before = rosa.get_session_auth_hash()
    assert save_person(by=mona, person=rosa, version=1, is_active=False).get_session_auth_hash() != before


def test_nobody_locks_the_book_behind_themselves(mona: Person) -> None:
    for fields in ({"role": "crew"}, {"is_active": False}):
        with pytest.raises(BadValue, match="Ask another manager"):
            save_person(by=mona, person=mona, version=1, **fields)
    assert save_person(by=mona, person=mona, version=1, name="Mona B.").name == "Mona B."


def test_a_manager_makes_no_administrator(mona: Person) -> None:
    root = make_person(role="administrator")
    with pytest.raises(NotAllowed):
        save_person(by=mona, code="X", name="X", role="administrator")
    with pytest.raises(NotAllowed):
        save_person(by=mona, person=root, version=1, is_active=False)
    assert save_person(by=root, person=mona, version=1, role="administrator").role == "administrator"


def test_a_manager_of_some_sites_hands_out_no_others(mona: Person) -> None:
    weir, mill = make_site(), make_site()
    nils = make_person(role="manager", sites=[weir])
    rosa = save_person(by=nils, code="ROSA", name="Rosa", role="crew", all_sites=False, sites=[weir])
    for fields in ({"all_sites": True}, {"sites": [weir, mill]}):
        for person in (nils, rosa):
            with pytest.raises(NotAllowed, match=r"yours|hand out no others"):
                save_person(by=nils, person=person, version=1, **fields)
        with pytest.raises(NotAllowed):
            save_person(by=nils, code="NEW", name="New", role="crew", **{"all_sites": False, **fields})
    tom = make_person(role="crew", sites=[weir, mill])
    for person in (mona, tom):
        with pytest.raises(NotAllowed, match="Ask a manager who sees all sites"):
            save_person(by=nils, person=person, version=1, name="Somebody else")
    assert save_person(by=mona, person=tom, version=1, sites=[mill]).sites.count() == 1
    assert save_person(by=nils, person=nils, version=1, name="Nils B.").sites.get() == weir


@pytest.mark.parametrize(
    ("fields", "field"),
    [
        ({"name": ""}, "name"),
        ({"role": "king"}, "role"),
        ({"code": "x y"}, "code"),
        ({"name": "x" * 10_000}, "name"),
        ({"password": "secret"}, "password"),
        ({"is_active": None}, "is_active"),
    ],
)
def test_a_wrong_person_is_refused_at_its_field(mona: Person, fields: dict[str, Any], field: str) -> None:
    with pytest.raises(BadValue) as refusal:
        save_person(by=mona, **{"code": "NEW", "name": "New", "role": "crew", **fields})
    assert refusal.value.field == field


def test_others_do_not_keep_people_or_the_book(weir: Carriage, rosa: Person, ines: Person) -> None:
    for person in (rosa, ines, weir.contact):
        with pytest.raises(NotAllowed):
            save_person(by=person, code="X", name="X", role="manager")
        with pytest.raises(NotAllowed):
            save_book(by=person, version=1, name="Ours")
        with pytest.raises(NotAllowed):
            sign_out_everywhere(by=person, person=weir.manager)


def test_a_lost_phone_is_signed_out_by_its_owner_or_a_manager(weir: Carriage, rosa: Person) -> None:
    hashes = {rosa.get_session_auth_hash()}
    hashes.add(sign_out_everywhere(by=rosa, person=rosa).get_session_auth_hash())
    hashes.add(sign_out_everywhere(by=weir.manager, person=rosa).get_session_auth_hash())
    assert len(hashes) == 3


def test_the_book_is_one_page_with_a_version(mona: Person) -> None:
    Book.load()
    book = save_book(by=mona, version=1, currency="NOK", visit_cost=Decimal("950"), zone="Europe/Oslo")
    assert (book.currency, book.version, Book.objects.count()) == ("NOK", 2, 1)
    with pytest.raises(ChangedSince, match="EUR → NOK"):
        save_book(by=mona, version=1, currency="SEK")
    for field, value in (
        ("zone", ""),
        ("zone", "Moon"),
        ("service_level", 1.5),
        ("currency", "EURO"),
        ("bench_target", -1),
    ):
        with pytest.raises(BadValue) as refusal:
            save_book(by=mona, version=2, **{field: value})
        assert refusal.value.field == field


def test_people_do_not_make_estimates_anew(mona: Person) -> None:
    before = DataVersion.current()
    save_person(by=mona, code="ROSA", name="Rosa", role="crew")
    assert DataVersion.current() == before
