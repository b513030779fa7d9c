"""The Forecast screen: sentence, bands, parts list and files; what came after it; refusals in words."""

from __future__ import annotations

import pytest
from django.test import Client

from fleet.models import DataVersion, Work
from tests.factories import make_crew, make_manager
from tests.reliability.small_fleet import SmallFleet
from tests.reliability.test_forecast import lived_fleet

pytestmark = pytest.mark.django_db


@pytest.fixture
def manager(client: Client) -> Client:
    client.force_login(make_manager())
    return client


def test_it_says_how_many_how_sure_and_how_many_to_have(manager: Client) -> None:
    lived_fleet(12)
    page = manager.get("/forecast/").content.decode()
    assert "will fail (80 of 100 quarters:" in page
    assert "is enough in 95 of 100" in page
    assert "They do not certify that any part is safe" in page
    for group in ("N2", "LOCK", "WEIR"):
        assert group in page


def test_the_parts_list_and_the_document_are_files(manager: Client) -> None:
    lived_fleet(12)
    answer = manager.get("/forecast/?as=csv")
    lines = b"".join(answer.streaming_content).decode("utf-8-sig").splitlines()
    assert lines[0] == "part,name,component,supplier,expected,from_80,to_80,plan_for_95,unit_cost"
    assert lines[1].startswith("N2,")
    (document,) = manager.get("/forecast/?as=json").json()["forecasts"]
    assert document["component"] == "NUT"


def test_entries_that_came_after_it_are_told_and_counting_again_goes_to_the_background(manager: Client) -> None:
    lived_fleet(6)
    assert "Count again" not in manager.get("/forecast/").content.decode()
    DataVersion.raise_version()
    assert "Entries came in since then" in manager.get("/forecast/").content.decode()
    assert manager.post("/forecast/").status_code == 302
    assert Work.objects.get().kind == "count_forecasts"


@pytest.mark.parametrize(
    "query", ["begin=2020-01-01", "begin=soon", "end=2030-01-01", "component=SAIL", "site=nowhere"]
)
def test_what_cannot_be_asked_is_refused_in_words(manager: Client, query: str) -> None:
    SmallFleet()
    answer = manager.get(f"/forecast/?{query}")
    assert answer.status_code == 422
    assert answer.context["form"].errors


def test_an_empty_book_says_what_to_do(manager: Client) -> None:
    assert "No component is in the catalogue yet" in manager.get("/forecast/").content.decode()


def test_a_crew_has_no_forecast(client: Client) -> None:
    client.force_login(make_crew())
    assert client.get("/forecast/").status_code == 403
