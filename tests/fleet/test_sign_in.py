"""Cast: Ada is a manager of every site, Cleo a crew member, Mallory nobody."""

from __future__ import annotations

import datetime as dt

import pytest
import time_machine
from django.db import OperationalError
from django.test import Client
from django.urls import reverse

from fleet.models import Person
from fleet.reset_links import reset_path

pytestmark = pytest.mark.django_db
PASSWORD = "three plain words 7"
EIGHT_WEEKS = 8 * 7 * 24 * 3600


@pytest.fixture
def ada() -> Person:
    return Person.objects.create_user("ADA", PASSWORD, name="Ada", role="manager", all_sites=True)


@pytest.fixture
def cleo() -> Person:
    return Person.objects.create_user("CLEO", PASSWORD, name="Cleo", role="crew")


def enter(client: Client, code: str = "ada", password: str = PASSWORD, **more: str):
    return client.post(reverse("sign_in"), {"username": code, "password": password, **more})


def test_signs_in_whatever_the_capitals_of_the_code_and_stays_for_eight_weeks(client, ada):
    answer = enter(client, " ada ")
    assert answer.status_code == 302
    assert answer.url == "/"
    assert client.session["_auth_user_id"] == str(ada.pk)
    assert client.cookies["halfnut_session"]["max-age"] == EIGHT_WEEKS
    assert client.cookies["halfnut_session"]["httponly"]


def test_goes_on_to_where_the_person_wanted_to_be_but_never_outside(client, ada):
    assert enter(client, next="/m/KM-1").url == "/m/KM-1"
    client.logout()
    assert enter(client, next="https://elsewhere.example/m").url == "/"
    client.logout()
    assert enter(client, next="//elsewhere.example").url == "/"


@pytest.mark.parametrize("code", ["ada", "nobody", "a\x00b", "x" * 10_000])
def test_wrong_entries_are_told_in_words_and_nothing_else(client, ada, code):
    answer = enter(client, code, "not it")
    assert answer.status_code == 422
    assert "_auth_user_id" not in client.session
    assert answer.context["form"].errors


def test_a_closed_account_does_not_get_in(client, ada):
    ada.is_active = False
    ada.save()
    assert enter(client).status_code == 422


def test_leaving_takes_a_post(client, ada):
    client.force_login(ada)
    assert client.get(reverse("sign_out")).status_code == 405
    signed_out = client.post(reverse("sign_out"))
    assert signed_out.url == reverse("sign_in")
    assert signed_out["Clear-Site-Data"] == '"cache"'
    assert "_auth_user_id" not in client.session


def test_eight_wrong_tries_close_one_name_at_one_address_for_a_while(client, ada, cleo, settings):
    settings.AXES_ENABLED = True
    for _ in range(7):
        assert enter(client, "ada", "guess").status_code == 422
    locked = enter(client, "aDA", "guess")
    assert locked.status_code == 429
    assert "15\u00a0minutes" in locked.content.decode()
    assert enter(client, "ada").status_code == 429  # even with the right one
    assert enter(client, "cleo").status_code == 302  # a colleague behind the same address
    elsewhere = Client(REMOTE_ADDR="192.0.2.7")
    assert enter(elsewhere, "ada").status_code == 302


def test_a_link_sets_a_new_password_once_and_opens_the_lock(client, ada, settings):
    settings.AXES_ENABLED = True
    for _ in range(8):
        enter(client, "ada", "guess")
    link = reset_path(ada)
    assert client.get(link).status_code == 200
    new = "another quiet word 9"
    assert client.post(link, {"new_password1": new, "new_password2": "x"}).status_code == 422
    assert client.post(link, {"new_password1": new, "new_password2": new}).status_code == 302
    assert enter(client, "ada", new).status_code == 302
    client.logout()
    assert client.get(link).status_code == 404
    assert client.post(link, {"new_password1": "x" * 12, "new_password2": "x" * 12}).status_code == 404


def test_a_link_ends_after_three_days(client, ada):
    with time_machine.travel(dt.datetime(2026, 3, 2, 8, 0, tzinfo=dt.UTC), tick=False) as journey:
        link = reset_path(ada)
        journey.shift(dt.timedelta(days=2, hours=23))
        assert client.get(link).status_code == 200
        journey.shift(dt.timedelta(hours=2))
        assert client.get(link).status_code == 404


@pytest.mark.parametrize("uid", ["MQ", "AAAA", "____", "OTk5OTk5OTk5OTk5OTk5OTk5OTk5OQ", "4pi5"])
def test_invented_links_are_no_links(client, ada, uid):
    assert client.get(reverse("reset_password", kwargs={"uidb64": uid, "token": "c0-ffee"})).status_code == 404


@pytest.mark.parametrize("weak", ["short", "password123", "1234567890123"])
def test_weak_passwords_are_refused_with_the_reason(client, ada, weak):
    answer = client.post(reset_path(ada), {"new_password1": weak, "new_password2": weak})
    assert answer.status_code == 422
    assert answer.context["form"].errors["new_password2"]


def test_changing_the_password_keeps_this_device_and_signs_the_others_out(ada):
    here, phone = Client(), Client()
    enter(here)
    enter(phone)
    new = {"old_password": PASSWORD, "new_password1": "a longer word 33", "new_password2": "a longer word 33"}
    assert here.post(reverse("change_password"), {**new, "old_password": "?"}).status_code == 422
    assert here.post(reverse("change_password"), new).status_code == 302
    assert here.get(reverse("change_password")).status_code == 200
    assert phone.get(reverse("change_password")).status_code == 302
    change = Person.history.filter(code="ADA").latest()
    assert (change.history_user, change.source, change.history_change_reason) == (ada, "browser", "new password")


def test_nobody_changes_a_password_without_signing_in(client, ada):
    answer = client.get(reverse("change_password"))
    assert answer.url == f"{reverse('sign_in')}?next={reverse('change_password')}"


def test_who_waited_too_long_for_the_database_is_told_so_and_nothing_else_is_hidden(client, ada, monkeypatch):
    """The embedded database lets one write at a time; a large import may take longer than anybody waits."""
    for words, status in (("database is locked", 503), ("no such table", 500)):

        def locked(*_: object, words: str = words) -> None:
            raise OperationalError(words)

        monkeypatch.setattr("fleet.views.sign_in.login", locked)
        client.raise_request_exception = False
        answer = enter(client)
        assert answer.status_code == status
        assert ("send it again" in answer.content.decode()) is (status == 503)
        assert answer.has_header("Retry-After") is (status == 503)
