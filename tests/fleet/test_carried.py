"""Cast: Cleo, a crew member whose phone was signed out at the weir; Mallory, who would like to send in her name."""

from __future__ import annotations

import re
from typing import Any

import pytest
from django.test import Client
from django.urls import reverse

from fleet.models import Person, Stop
from tests.factories import Carriage

pytestmark = pytest.mark.django_db
PASSWORD = "three plain words 7"
STOP = {
    "day": "2026-03-09", "time": "09:30", "note": "hums, does not move",
    "entry_key": "5c0e6a5e-43b8-4d0b-9c95-000000000001",
}  # fmt: skip


@pytest.fixture
def weir() -> Carriage:
    carriage = Carriage(code="KM-1")
    carriage.crew.set_password(PASSWORD)
    carriage.crew.save()
    return carriage


def hidden(page: Any) -> dict[str, str]:
    """The hidden fields of the page's last form, as a browser would send them."""
    form = page.content.decode().rsplit('<form class="form"', 1)[1]
    return dict(re.findall(r'<input type="hidden" name="([^"]+)" value="([^"]*)"', form))


def signed_in_again(client: Client, page: Any, person: Person) -> Any:
    said = {**hidden(page), "username": person.code, "password": PASSWORD}
    return client.post(reverse("sign_in"), said)


def test_an_entry_outlives_a_sign_out_and_is_recorded_once_sent(weir: Carriage) -> None:
    client, address = Client(), reverse("report_stop", args=["KM-1"])
    asked = client.post(address, STOP)
    assert asked.status_code == 403
    assert "What you entered is kept" in asked.content.decode()
    wrong = client.post(reverse("sign_in"), {**hidden(asked), "username": weir.crew.code, "password": "not it"})
    assert wrong.status_code == 422
    kept = signed_in_again(client, wrong, weir.crew)
    assert "Not recorded yet" in kept.content.decode()
    assert not Stop.objects.exists()
    assert f'action="{address}"' in kept.content.decode()
    client.post(address, {name: value for name, value in hidden(kept).items() if name != "csrfmiddlewaretoken"})
    assert Stop.objects.get().note == STOP["note"]


def test_a_form_older_than_the_sign_in_keeps_its_entry_but_a_page_elsewhere_sends_nothing(weir: Carriage) -> None:
    client, address = Client(enforce_csrf_checks=True), reverse("report_stop", args=["KM-1"])
    client.force_login(weir.crew)
    own = client.post(address, STOP, headers={"Sec-Fetch-Site": "same-origin"})
    assert own.status_code == 200
    assert STOP["note"] in own.content.decode()
    for elsewhere in ({"Sec-Fetch-Site": "cross-site", "Origin": "https://mallory.example"}, {}):
        refused = client.post(address, STOP, headers=elsewhere)
        assert refused.status_code == 403
        assert "This form is too old" in refused.content.decode()
        assert STOP["note"] not in refused.content.decode()


def test_no_password_and_nothing_unsigned_is_carried(weir: Carriage) -> None:
    client = Client()
    changed = client.post(reverse("change_password"), {"old_password": "a", "new_password1": "b"})
    assert changed.status_code == 302
    forged = {"username": weir.crew.code, "password": PASSWORD, "carried": '{"to": "/m/KM-1/stop", "fields": []}'}
    assert client.post(reverse("sign_in"), forged).url == "/"


def test_a_part_of_a_page_sends_its_whole_page_to_sign_in(weir: Carriage) -> None:
    headers = {"HX-Request": "true", "HX-Current-URL": "http://testserver/log/?q=KM"}
    answer = Client().get(reverse("log"), {"q": "KM-"}, headers=headers)
    assert answer.headers["HX-Redirect"] == "/sign-in/?next=/log/%3Fq%3DKM"
