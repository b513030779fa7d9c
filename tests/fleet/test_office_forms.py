"""Forms of the office: what is wrong is said at its field, nothing is stored, nothing breaks."""

from __future__ import annotations

from typing import Any

import pytest
from django.test import Client

from fleet.models import Book, Component, FailureMode, Module, ModuleType, Part, Person, Placement, Position, Site
from tests import factories as make

pytestmark = pytest.mark.django_db
LONG = "x" * 10_000
ROTTEN = [LONG, "nul\0byte", "=1+1", "-1", "1e999", "2026-02-30", "31.12.2026", "९", "<script>", " "]


@pytest.fixture
def world(client: Client) -> make.Carriage:
    carriage = make.Carriage()
    make.make_book()
    client.force_login(carriage.manager)
    return carriage


def forms_of(world: make.Carriage) -> dict[str, dict[str, Any]]:
    """Every form of the office with a right entry."""
    elsewhere = make.make_site()
    return {
        "/sites/new/": {"code": "POND", "kind": "field"},
        "/modules/new/": {"code": "BC-9", "type": world.type.code},
        "/modules/place/": {"module": world.module.code, "site": elsewhere.code, "from_on": "2026-01-05"},
        "/catalogue/components/new/": {"code": "SAIL", "clock": "days"},
        f"/catalogue/components/{world.nuts.code}/modes/new/": {"code": "TORN"},
        "/catalogue/types/new/": {"code": "KITE"},
        f"/catalogue/types/{world.type.code}/positions/new/": {"code": "P-9", "component": world.nuts.code, "order": 1},
        "/catalogue/parts/new/": {
            "code": "S-9",
            "component": world.nuts.code,
            "state": "current",
            "pack": 1,
            "minimum": 0,
        },
        "/people/new/": {"code": "ROSA", "name": "Rosa", "role": "crew", "sites": [world.site.code], "is_active": "on"},
    }


def counts() -> list[int]:
    models = (Site, Module, Placement, Component, FailureMode, ModuleType, Position, Part, Person, Book)
    return [model.objects.count() for model in models]


def test_a_right_entry_is_stored(client: Client, world: make.Carriage) -> None:
    for address, entry in forms_of(world).items():
        before = counts()
        answer = client.post(address, entry)
        assert answer.status_code == 302, (address, answer.content.decode()[-3000:])
        assert sum(counts()) == sum(before) + 1, address


def test_every_field_takes_rotten_input_as_an_error_in_words(client: Client, world: make.Carriage) -> None:
    for address, entry in forms_of(world).items():
        fields = client.get(address).context["form"].fields
        for name in fields:
            for rotten in ROTTEN:
                before = counts()
                answer = client.post(address, {**entry, name: rotten})
                assert answer.status_code in {302, 422}, (address, name, rotten[:20])
                if answer.status_code == 422:
                    assert counts() == before, (address, name, rotten[:20])
                    assert answer.context["form"].errors, (address, name, rotten[:20])
                elif sum(counts()) > sum(before):
                    entry = {**entry, "code": f"C-{make.number()}"} if "code" in entry else entry


def test_an_empty_form_names_what_is_missing(client: Client, world: make.Carriage) -> None:
    for address in forms_of(world):
        answer = client.post(address, {})
        assert answer.status_code == 422, address
        assert answer.context["form"].errors, address


def test_a_code_that_exists_is_refused(client: Client, world: make.Carriage) -> None:
    answer = client.post("/sites/new/", {"code": world.site.code.lower(), "kind": "field"})
    assert answer.status_code == 422
    assert "code" in answer.context["form"].errors


def test_who_edits_an_older_version_is_told_what_changed(client: Client, world: make.Carriage) -> None:
    address = f"/sites/{world.site.code}/edit/"
    opened = client.get(address).context["form"]
    entry = {"code": world.site.code, "kind": "field", "zone": "Europe/Lisbon", "version": opened["version"].value()}
    assert client.post(address, {**entry, "name": "Old lock"}).status_code == 302
    answer = client.post(address, {**entry, "name": "New lock"})
    assert answer.status_code == 422
    assert "since you opened it" in answer.content.decode()
    world.site.refresh_from_db()
    assert world.site.name == "Old lock"


def test_history_tells_old_and_new_and_who(client: Client, world: make.Carriage) -> None:
    address = f"/sites/{world.site.code}/edit/"
    client.post(address, {"code": world.site.code, "kind": "field", "zone": "UTC", "name": "Old lock", "version": 1})
    page = client.get("/history/?kind=site").content.decode()
    assert "Old lock" in page
    assert world.manager.name in page
    assert "browser" in page


def test_nobody_hands_themselves_the_link_of_somebody_who_may_more(client: Client, world: make.Carriage) -> None:
    """Whoever opens the link chooses the password, and signs in as that person."""
    root = make.make_person(role="administrator")
    nils = make.make_person(role="manager", sites=[world.site])
    stranger = make.make_person(role="crew", sites=[make.make_site()])
    for by, person, given in (
        (world.manager, root, False), (nils, world.manager, False), (nils, stranger, False), (nils, root, False),
        (nils, world.crew, True), (root, world.manager, True), (world.manager, stranger, True),
    ):  # fmt: skip
        client.force_login(by)
        shown = client.get(f"/people/{person.code}/edit/").content.decode()
        answer = client.post(f"/people/{person.code}/link/", follow=True).content.decode()
        told = ("Make a password link" in shown, "Whoever opens it chooses the password" in answer)
        assert told == (given, given), (by.role, person.role)


def test_a_manager_can_hand_over_a_link_and_sign_somebody_out(client: Client, world: make.Carriage) -> None:
    page = client.post(f"/people/{world.crew.code}/link/").content.decode()
    assert "/password/" in page
    phone = Client()
    phone.force_login(world.crew)
    assert phone.get("/").status_code == 200
    client.post(f"/people/{world.crew.code}/sign-out/")
    assert phone.get("/").status_code == 302


@pytest.mark.parametrize("version", ["", "0", "2", "2147483648", "9" * 40, "²", "one"])
def test_an_edit_says_which_state_it_was_opened_in(client: Client, world: make.Carriage, version: str) -> None:
    address = f"/sites/{world.site.code}/edit/"
    entry = {"code": world.site.code, "kind": "field", "zone": "Europe/Lisbon", "name": "Old lock"}
    for said in (entry, {**entry, "version": version}):
        answer = client.post(address, said)
        assert answer.status_code == 422
        assert "Open it again" in answer.content.decode()
    world.site.refresh_from_db()
    assert world.site.name != "Old lock"


def test_a_correction_and_a_strike_out_say_which_state_they_were_opened_in(
    client: Client, world: make.Carriage
) -> None:
    fitting = world.fit()
    for verb in ("correct", "strike-out"):
        address = f"/{verb}/fitting/{fitting.pk}/"
        opened = client.get(address).context["form"]
        shown = {name: "" if (said := opened[name].value()) is None else said for name in opened.fields}
        for version in ("", fitting.version + 1):
            answer = client.post(address, {**shown, "lot": "L-1", "reason": "read again", "version": version})
            assert answer.status_code == 422, verb
            assert "Open it again" in answer.content.decode(), (verb, answer.context["form"].errors)
    fitting.refresh_from_db()
    assert (fitting.lot, fitting.struck_out) == ("", "")


def test_who_places_a_module_into_a_taken_bay_is_told_who_stands_there(client: Client, world: make.Carriage) -> None:
    there = make.make_site(name="Withy Lock")
    other = make.Carriage(code="KM-8", site=there)
    Placement.objects.filter(module=other.module).update(bay="B-6")
    entry = {"module": world.module.code, "site": there.code, "bay": "B-6", "from_on": "2026-01-05"}
    told = client.post("/modules/place/", entry, follow=True).content.decode()
    assert "the stay at Withy Lock since 5\u00a0January 2026, bay B-6, where KM-8 stands too on record" in told
