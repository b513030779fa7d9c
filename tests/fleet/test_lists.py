"""Lists: they filter, sort, page and export from the address, and ask a constant number of queries."""

from __future__ import annotations

import csv
import io

import pytest
from django.db import connection
from django.test import Client
from django.test.utils import CaptureQueriesContext

from tests import factories as make

pytestmark = pytest.mark.django_db
LISTS = ["/", "/sites/", "/modules/", "/catalogue/", "/catalogue/parts/", "/people/", "/history/", "/looks-wrong/"]


@pytest.fixture
def manager(client: Client) -> Client:
    client.force_login(make.make_manager())
    return client


def fleet(count: int) -> None:
    kind = make.make_type()
    for number in range(count):
        site = make.make_site(name=f"Lock {number}")
        make.make_module(site=site, type=kind)
        part = make.make_part()
        make.make_mode(component=part.component)
        make.make_crew(site)


def queries(client: Client, address: str) -> int:
    with CaptureQueriesContext(
        connection,
    ) as asked:
        assert client.get(address).status_code == 200
    return len(asked)


@pytest.mark.parametrize("address", LISTS)
def test_the_number_of_queries_does_not_grow_with_the_list(manager: Client, address: str) -> None:
    fleet(2)
    manager.get(address)
    few = queries(manager, address)
    fleet(25)
    assert queries(manager, address) <= few
    assert few < 30


def test_words_find_part_of_a_name_whatever_its_case(manager: Client) -> None:
    make.make_site(code="A-1", name="Östra slussen")
    make.make_site(code="A-2", name="Mill Race")
    page = manager.get("/sites/?q=östra SLUSS").content.decode()
    assert "Östra slussen" in page
    assert "Mill Race" not in page


def test_codes_sort_as_people_count(manager: Client) -> None:
    for code in ("K-10", "K-9", "K-100"):
        make.make_module(code=code, site=make.make_site())
    page = manager.get("/modules/").content.decode()
    assert page.index(">K-9<") < page.index(">K-10<") < page.index(">K-100<")
    turned = manager.get("/modules/?sort=-module").content.decode()
    assert turned.index(">K-100<") < turned.index(">K-9<")


def test_a_long_list_has_pages_and_keeps_the_filter(manager: Client) -> None:
    site = make.make_site()
    for number in range(55):
        make.make_module(code=f"Q-{number}", site=site)
    page = manager.get("/modules/?q=Q-").content.decode()
    assert "?q=Q-&amp;page=2" in page
    assert ">Q-54<" in manager.get("/modules/?q=Q-&page=2").content.decode()


def test_the_file_holds_every_row_and_no_formula(manager: Client) -> None:
    for number in range(60):
        make.make_site(code=f"S-{number}", name="=2+3" if number == 7 else "")
    answer = manager.get("/sites/?as=csv")
    body = b"".join(answer.streaming_content).decode("utf-8-sig")
    rows = list(csv.reader(io.StringIO(body)))
    assert len(rows) == 61
    assert rows[0][:3] == ["Site", "Code", "Kind"]
    assert {row[0] for row in rows[1:] if "=" in row[0]} == {"'=2+3"}


@pytest.mark.parametrize(
    "query", ["?sort=nothing", "?page=99999", "?page=-1", "?page=x", "?state=flying", "?q=%00", "?q=" + "x" * 9000]
)
def test_odd_addresses_are_answered(manager: Client, query: str) -> None:
    make.make_module(site=make.make_site())
    for address in ("/modules/", "/sites/", "/catalogue/parts/", "/people/", "/history/", "/search/"):
        assert manager.get(address + query).status_code in {200, 422}


def test_an_empty_list_says_what_to_do(manager: Client) -> None:
    assert "A planner or manager adds the first one" in manager.get("/sites/").content.decode()
    make.make_site(code="A-1")
    assert "Widen a filter" in manager.get("/sites/?q=nowhere").content.decode()


def test_a_search_of_odd_signs_leads_to_the_same_list(manager: Client) -> None:
    for number in range(21):
        make.make_site(code=f"A-{number}", name=f"Alder & Sons #{number} + mill")
    found = manager.get("/search/", {"q": "Alder & Sons #"}).context["found"]
    [sites] = [group for group in found if group["name"] == "Sites"]
    assert sites["more_than_shown"]
    assert manager.get(sites["all_url"]).context["filter"].qs.count() == 21
