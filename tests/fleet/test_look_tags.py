"""What the template tags write, and the links that keep a list's address."""

from __future__ import annotations

import datetime as dt
import json
from types import SimpleNamespace
from typing import Any
from urllib.parse import parse_qs

import pytest
import time_machine
from django.template import Context, Template
from django.test import RequestFactory

from fleet.formats import FIXED
from tests.factories import make_book


def write(source: str, address: str = "/modules/", **context: Any) -> str:
    """The template as text with ordinary spaces."""
    context["request"] = RequestFactory().get(address)
    return Template("{% load look %}" + source).render(Context(context)).replace(FIXED, " ")


def test_number_and_percent() -> None:
    assert (
        write("{{ 61400|number }} {{ share|percent }} {{ play|number:1 }}", share=0.22, play=1.26) == "61 400 22 % 1.3"
    )


@time_machine.travel("2026-12-01 09:00:00+00:00")
def test_a_day_shows_its_year_only_when_it_is_another() -> None:
    days = {"near": dt.date(2026, 10, 4), "far": dt.date(2024, 1, 21)}
    assert write("{{ near|short_day }}, {{ far|short_day }}, {{ far|long_day }}", **days) == (
        "4 Oct, 21 Jan 2024, 21 January 2024"
    )


def test_an_instant_is_shown_in_the_zone_of_its_site() -> None:
    at = dt.datetime(2026, 6, 30, 23, 30, tzinfo=dt.UTC)
    assert write('{{ at|moment:"Europe/Oslo" }}', at=at) == "1 July 2026, 01:30"
    assert write('{{ at|day_in:"America/New_York" }}', at=at).startswith("30 Jun")


@pytest.mark.django_db
def test_an_instant_of_no_site_is_shown_by_the_books_clock_and_never_against_a_chosen_zone() -> None:
    make_book(zone="Europe/Amsterdam")
    at = dt.datetime(2024, 1, 21, 23, 30, tzinfo=dt.UTC)
    assert write("{{ at|moment }} {{ at|long_day }}", at=at) == "22 January 2024, 00:30 22 January 2024"
    chosen = "{% load tz %}{% timezone 'UTC' %}{{ at|moment }}{% endtimezone %}"
    assert write(chosen, at=at) == "21 January 2024, 23:30"


@pytest.mark.parametrize("kind", ["object", "mapping"])
def test_estimate_carries_its_interval(kind: str) -> None:
    ends = {"estimate": 61034.2, "lower": 54010.0, "upper": 70220.0}
    result = SimpleNamespace(**ends) if kind == "object" else ends
    text = write('{% estimate result unit="strokes" %}', result=result)
    assert text == '<b class="num">61 000</b> strokes <span class="ci num">(54 000 to 70 200)</span>'


def test_estimate_of_a_share_writes_the_sign_once() -> None:
    result = {"estimate": 0.22, "lower": 0.14, "upper": 0.331}
    assert '<b>22 %</b> <span class="ci">14–33</span>' in write(
        '{% estimate result unit="share" dash=True %}', result=result
    )


def test_estimate_without_an_upper_end_says_so() -> None:
    result = {"estimate": 210.0, "lower": 150.0, "upper": float("inf")}
    assert "(over 150)" in write("{% estimate result %}", result=result)


def test_estimate_that_is_not_known() -> None:
    assert write("{% estimate result %}", result={"estimate": None}) == '<span class="est"><b>not known</b></span>'


def test_estimate_shows_value_and_ends_to_the_same_place() -> None:
    text = write("{% estimate result %}", result={"estimate": 2.14, "lower": 1.6, "upper": 12.71})
    assert '2.1</b> <span class="ci num">(1.6 to 12.7)' in text


def test_estimate_escapes_its_unit() -> None:
    assert "&lt;b&gt;" in write("{% estimate result unit=unit %}", result={"estimate": 1}, unit="<b>")


def query(text: str) -> dict[str, list[str]]:
    return parse_qs(text.replace("&amp;", "&").lstrip("?"))


def test_sorting_keeps_the_filters_and_goes_back_to_the_first_page() -> None:
    link = write('{% sort_url "site" %}', "/modules/?state=stopped&page=4&sort=tag")
    assert query(link) == {"state": ["stopped"], "sort": ["site"]}


def test_sorting_twice_turns_the_order_round() -> None:
    assert query(write('{% sort_url "site" %}', "/modules/?sort=site")) == {"sort": ["-site"]}
    assert query(write('{% sort_url "site" %}', "/modules/?sort=-site")) == {"sort": ["site"]}


def test_the_sorted_column_is_told_to_screen_readers() -> None:
    assert write('{% sort_state "site" %}', "/modules/?sort=-site") == "descending"
    assert write('{% sort_state "tag" %}', "/modules/?sort=-site") == ""


def test_page_links_keep_every_filter_value() -> None:
    link = write("{% with_query page=3 %}", "/modules/?site=A&site=B&q=K-9")
    assert query(link) == {"site": ["A", "B"], "q": ["K-9"], "page": ["3"]}


def test_links_do_not_let_markup_through() -> None:
    assert "<" not in write("{% with_query page=3 %}", '/modules/?q="><script>')


def test_names_in_a_figure_are_shown_as_written() -> None:
    """A lot or a failure mode is named by a person; its name may be no link, no bold and no end of the script."""
    name = '</script><a href="https://mallory.example"><b>N2</b></a> < 5'
    figure = {
        "data": [{"name": name, "x": [name, 1.5], "hovertemplate": f"%{{y}}<br>%{{x}}<extra>{name}</extra>"}],
        "layout": {"xaxis": {"title": name}, "annotations": ({"text": name},)},
    }
    source = "{% include 'parts/chart.html' with chart=chart %}"
    page = write(source, chart={"id": "one", "figure": figure, "sentence": name, "columns": [], "rows": []})
    assert "<a href" not in page
    drawn = json.loads(page.split('<script id="one" type="application/json">')[1].split("</script>")[0])
    shown = name.replace("<", "&lt;")
    assert drawn["data"] == [
        {"name": shown, "x": [shown, 1.5], "hovertemplate": f"%{{y}}<br>%{{x}}<extra>{shown}</extra>"}
    ]
    assert drawn["layout"] == {"xaxis": {"title": shown}, "annotations": [{"text": shown}]}
