"""Cast: Ines, a manager at her desk and with a phone, who asks how long nuts last; and a reader without scripts."""

from __future__ import annotations

import re
from typing import Any

import pytest
from django.conf import settings
from django.test import Client
from playwright.sync_api import Browser, Page, expect

from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.models import Component, Part
from tests.factories import make_manager
from tests.reliability.small_fleet import SmallFleet

pytestmark = [pytest.mark.browser, pytest.mark.django_db(transaction=True)]
CHOICES = "as_of=2024-07-01"


@pytest.fixture
def nuts(transactional_db: None) -> SmallFleet:
    """Two designs of nut at two sites, and a screw that never failed."""
    fleet = SmallFleet()
    sites = fleet.site("LOCK", name="Withy Lock"), fleet.site("MILL", name="Marl Mill")
    for number in range(10):
        module = fleet.module(f"M-{number}", sites[number % 2])
        life = 20 + 6 * number
        fleet.fit(module, 0, life, "failed", mode=fleet.worn if number % 3 else fleet.stripped, part=fleet.n1)
        fleet.fit(module, life, *((life + 60, "failed") if number < 6 else ()), part=fleet.n2)
    screws = Component.objects.create(code="SCREW", name="Lead screw", clock="days")
    s1 = Part.objects.create(code="S1", component=screws)
    for number in range(3):
        fleet.fit(fleet.module(f"S-{number}", sites[0]), 0, part=s1)
    rebuild_clocks()
    return fleet


def sign_in(context: Any, live_server: Any) -> None:
    client = Client()
    client.force_login(make_manager(code="INES"))
    cookie = {"name": settings.SESSION_COOKIE_NAME, "value": client.cookies[settings.SESSION_COOKIE_NAME].value}
    context.add_cookies([{**cookie, "url": live_server.url}])


@pytest.fixture
def desk(page: Page, context: Any, live_server: Any, nuts: SmallFleet) -> Page:
    sign_in(context, live_server)
    page.set_viewport_size({"width": 1440, "height": 900})
    page.goto(f"{live_server.url}/life/?{CHOICES}")
    return page


def steps_drawn(page: Page) -> Any:
    return page.locator("[data-chart=survival] .scatterlayer path.js-line")


def bring_panels(page: Page) -> None:
    """Scrolls down until no panel waits any more."""
    waiting = page.locator(".life-panel.waiting")
    while (left := waiting.count()) > 0:
        page.evaluate("document.querySelector('.life-panel.waiting')?.scrollIntoView()")
        expect(waiting).not_to_have_count(left, timeout=20_000)


def test_both_charts_are_drawn_and_a_choice_redraws_them_without_a_reload(desk: Page) -> None:
    expect(steps_drawn(desk).first).to_be_attached()
    expect(desk.locator("[data-chart=weibull-plot] .scatterlayer .point").first).to_be_attached()
    desk.evaluate("document.body.dataset.same = 'yes'")
    desk.get_by_label("Grouped by").select_option("site")
    expect(desk.get_by_role("heading", name="Lives by site")).to_be_visible()
    expect(desk.get_by_role("rowheader", name=re.compile("LOCK Withy Lock"))).to_be_visible()
    expect(steps_drawn(desk).first).to_be_attached()
    expect(desk).to_have_url(re.compile(r"as_of=2024-07-01.*"))
    expect(desk).to_have_url(re.compile("by=site"))
    expect(desk.locator("body[data-same=yes]")).to_be_visible()
    desk.go_back()
    expect(desk.get_by_role("heading", name="Lives by part")).to_be_visible()


def test_another_component_brings_its_own_parts_and_title(desk: Page) -> None:
    desk.get_by_text("Only some sites, parts or modes").click()
    expect(desk.get_by_label("N1", exact=True)).to_be_visible()
    desk.get_by_label("N1", exact=True).check()
    expect(desk.get_by_text("Chosen: only parts N1.")).to_be_visible()
    desk.get_by_label("Component").select_option("SCREW")
    expect(desk.get_by_role("heading", level=1)).to_contain_text("Lead screw")
    expect(desk.get_by_text("None of the S1 lead screws has failed")).to_be_visible()
    expect(desk.get_by_label("N1", exact=True)).to_have_count(0)


def test_a_choice_that_cannot_be_answered_says_why_without_a_reload(desk: Page) -> None:
    desk.get_by_label("Records up to").fill("2999-01-01")
    expect(desk.locator("#list").get_by_text("1 January 2999 has not come yet")).to_be_visible()
    desk.get_by_label("Records up to").fill("2024-06-01")
    expect(desk.get_by_role("heading", name="Still working at each age")).to_be_visible()


def test_it_works_without_scripts(browser: Browser, live_server: Any, nuts: SmallFleet) -> None:
    context = browser.new_context(java_script_enabled=False)
    sign_in(context, live_server)
    page = context.new_page()
    page.goto(f"{live_server.url}/life/?{CHOICES}")
    page.get_by_label("Grouped by").select_option("site")
    page.get_by_role("button", name="Show").click()
    expect(page.get_by_role("heading", name="Lives by site")).to_be_visible()
    page.get_by_text("As a table").first.click()
    expect(page.get_by_role("columnheader", name="LOCK, still working")).to_be_visible()
    context.close()


@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_nothing_that_hinders_reading(desk: Page, live_server: Any, scheme: str) -> None:
    """The rules of WCAG 2.2 A and AA as axe-core checks them."""
    from axe_playwright_python.sync_playwright import Axe

    desk.emulate_media(color_scheme=scheme)
    rules = {"runOnly": ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa"]}
    for address in (CHOICES, f"{CHOICES}&component=SCREW&rigs=on"):
        desk.goto(f"{live_server.url}/life/?{address}")
        expect(steps_drawn(desk).first).to_be_attached()
        bring_panels(desk)
        for summary in desk.locator("#list details > summary").all():
            summary.click()
        found = Axe().run(desk, options=rules).response["violations"]
        assert not found, [(rule["id"], [node["html"][:160] for node in rule["nodes"]][:3]) for rule in found]


def test_no_width_makes_the_page_scroll_sideways(desk: Page) -> None:
    bring_panels(desk)
    for width in (360, 390, 768, 1024, 1920):
        desk.set_viewport_size({"width": width, "height": 800})
        expect(steps_drawn(desk).first).to_be_attached()
        assert desk.evaluate("document.documentElement.scrollWidth") <= width, width
