"""Charts, theme and widths in a real browser, under the content policy of the program."""

from __future__ import annotations

import mimetypes
import re
from pathlib import Path
from typing import Any
from urllib.parse import urlsplit

import pytest
from django import forms
from django.conf import settings
from django.template.loader import render_to_string
from django.test import RequestFactory
from playwright.sync_api import Page, Route, expect

STATIC = Path(__file__).resolve().parents[2] / "static"
HERE = "http://localhost:1"  # answered by `serve`, never by a network

pytestmark = pytest.mark.browser

LINE = {"color": "var(--p2)", "dash": "11px,3px"}
CHART = {
    "id": "curves",
    "sentence": "Half of the N2 nuts fail within 61 days.",
    "figure": {
        "data": [{"type": "scatter", "x": [0, 61, 120], "y": [1, 0.5, 0.1], "mode": "lines", "line": LINE}],
        "layout": {"xaxis": {"title": {"text": "days in service"}}},
    },
    "columns": [{"key": "days", "label": "Days", "numeric": True}, {"key": "left", "label": "Still working"}],
    "rows": [[0, "100 %"], [61, "50 %"], [120, "10 %"]],
    "csv_url": "?as=csv",
}
SCREENS = [
    {"name": name, "url": f"/{name.lower()}/", "current": name == "Redesigns"}
    for name in ("Today", "Sites", "Modules", "Log", "Bench", "Stores", "Life", "Forecast", "Redesigns")
]


class Filter(forms.Form):
    site = forms.ChoiceField(choices=[("", "every site"), ("ALDER", "Alder Sluice")], required=False)
    part = forms.CharField(required=False)


class Owner:
    """Somebody signed in, as the head wants to know her."""

    is_authenticated = True
    name = "Mara Lindqvist"
    role = "manager"


def policy() -> str:
    directives = settings.CONTENT_SECURITY_POLICY["DIRECTIVES"]
    return "; ".join(f"{name} {' '.join(sources)}" for name, sources in directives.items())


def serve(page: Page, *, without: str = "", **context: Any) -> None:
    """Opens a page that holds one chart and one wide table, with the static files from their folder."""
    html = render_to_string("base.html", {"screens": SCREENS, "user": Owner(), **context})
    body = render_to_string("parts/chart.html", {"chart": CHART})
    columns = [{"key": str(place), "label": f"Column number {place}", "numeric": True} for place in range(9)]
    wide = render_to_string("parts/table.html", {"columns": columns, "rows": [[10**6] * 9], "caption": "Wide"})
    request = RequestFactory().get("/")
    filters = render_to_string("parts/filter_form.html", {"form": Filter(), "request": request})
    html = html.replace("</main>", f'<h1>Life</h1>{filters}<div id="list">{body}{wide}</div></main>')

    def answer(route: Route) -> None:
        path = urlsplit(route.request.url).path
        if path == "/":
            route.fulfill(body=html, content_type="text/html", headers={"Content-Security-Policy": policy()})
            return
        file = STATIC / path.removeprefix("/static/")
        if (without and without in path) or not file.is_file():
            route.fulfill(status=404, body="")
            return
        route.fulfill(body=file.read_bytes(), content_type=mimetypes.guess_type(file.name)[0] or "font/woff2")

    page.route(f"{HERE}/**", answer)
    page.goto(f"{HERE}/")


def curve_colour(page: Page) -> str:
    return page.locator(".chart .scatterlayer path.js-line").first.evaluate("line => getComputedStyle(line).stroke")


def test_chart_is_drawn_under_the_policy(page: Page) -> None:
    """The fixture `context` fails the test for any breach of the policy that the browser reports."""
    serve(page)
    expect(page.locator(".chart .scatterlayer path.js-line")).to_have_count(1)
    # The rules that Plotly may not inject came by the style sheet: without them the drawings would stand in a row.
    assert page.locator(".chart .main-svg").first.evaluate("svg => getComputedStyle(svg).position") == "absolute"


def test_filtering_keeps_the_address_and_draws_the_chart_again(page: Page) -> None:
    serve(page)
    curve = page.locator(".chart .scatterlayer path.js-line")
    expect(curve).to_have_count(1)
    page.locator("#list").evaluate("list => { list.dataset.old = 'yes' }")
    page.get_by_label("Site", exact=True).select_option("ALDER")
    expect(page.locator("#list:not([data-old])")).to_be_visible()
    expect(page).to_have_url(f"{HERE}/?site=ALDER")  # without the empty ones
    expect(curve).to_have_count(1)
    page.go_back()
    expect(page).to_have_url(f"{HERE}/")
    expect(curve).to_have_count(1)


def test_chart_offers_no_upload(page: Page) -> None:
    serve(page)
    page.locator(".chart .nsewdrag").hover()
    names = page.locator(".chart .modebar-btn").evaluate_all("all => all.map(one => one.dataset.title)")
    assert len(names) == 4
    assert not [name for name in names if re.search("cloud|edit|upload|share", name, re.IGNORECASE)]


def test_chart_follows_the_theme(page: Page) -> None:
    page.emulate_media(color_scheme="light")
    serve(page)
    expect(page.locator(".chart .scatterlayer path.js-line")).to_have_count(1)
    assert curve_colour(page) == "rgb(29, 79, 145)"
    page.emulate_media(color_scheme="dark")
    expect(page.locator(".chart .scatterlayer path.js-line")).to_have_css("stroke", "rgb(141, 184, 242)")


def test_the_person_chooses_the_paper_and_it_is_kept(page: Page) -> None:
    page.emulate_media(color_scheme="light")
    serve(page)
    page.locator(".person summary").click()
    page.get_by_label("dark", exact=True).check()
    expect(page.locator("body")).to_have_css("background-color", "rgb(20, 26, 32)")
    expect(page.locator(".chart .scatterlayer path.js-line")).to_have_css("stroke", "rgb(141, 184, 242)")
    page.reload()
    expect(page.locator("body")).to_have_css("background-color", "rgb(20, 26, 32)")


def test_table_stands_in_for_a_chart_that_cannot_be_drawn(page: Page) -> None:
    serve(page, without="plotly-basic")
    expect(page.get_by_text("The drawing could not be made")).to_be_visible()
    expect(page.get_by_role("cell", name="50 %")).to_be_visible()


def test_no_page_is_wider_than_its_window(page: Page) -> None:
    page.set_viewport_size({"width": 360, "height": 800})
    serve(page)
    expect(page.locator(".chart .scatterlayer path.js-line")).to_have_count(1)
    for width in (360, 390, 768, 1024, 1440, 1920):
        page.set_viewport_size({"width": width, "height": 800})
        expect(page.locator(".chart .main-svg").first).to_have_attribute("width", re.compile(r"\d+"))
        assert page.evaluate("document.documentElement.scrollWidth") == width


def test_head_leaves_a_phone_most_of_its_height(page: Page) -> None:
    page.set_viewport_size({"width": 360, "height": 640})
    serve(page)
    box = page.locator("header.top").bounding_box()
    assert box is not None
    assert box["height"] < 120
    expect(page.get_by_role("link", name="Redesigns")).to_be_in_viewport()  # the current screen, last in its row


def test_menu_closes_by_escape(page: Page) -> None:
    serve(page)
    page.locator(".person summary").click()
    expect(page.locator(".person-menu")).to_be_visible()
    page.keyboard.press("Escape")
    expect(page.locator(".person-menu")).to_be_hidden()
    expect(page.locator(".person summary")).to_be_focused()
