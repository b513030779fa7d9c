"""Cast: Ines with a phone and at a printer, a reader without scripts; a fleet of nuts whose truth is known."""

from __future__ import annotations

import re
from typing import Any

import pytest
from playwright.sync_api import Browser, Page, expect

from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.models import Component, Part
from reliability.life_panels import PANELS
from tests.browser.test_life_screen import bring_panels, sign_in
from tests.reliability.small_fleet import day
from tests.reliability.worked_fleet import LAST_DAY, WorkedFleet

pytestmark = [pytest.mark.browser, pytest.mark.django_db(transaction=True)]
CHOICES = f"component=NUT&as_of={day(LAST_DAY).isoformat()}"


@pytest.fixture
def worked(transactional_db: None) -> WorkedFleet:
    fleet = WorkedFleet(bad_lot=True)
    bearings = Component.objects.create(code="BEARING", name="Upper bearing", clock="days")
    b1 = Part.objects.create(code="B1", component=bearings)
    for number in range(4):
        fleet.fit(fleet.module(f"B-{number}", fleet.sites["ALDER"]), 0, part=b1)
    rebuild_clocks()
    return fleet


@pytest.fixture
def phone(page: Page, context: Any, live_server: Any, worked: WorkedFleet) -> Page:
    sign_in(context, live_server)
    page.set_viewport_size({"width": 390, "height": 844})
    page.goto(f"{live_server.url}/life/?{CHOICES}")
    return page


def test_panels_come_when_the_thumb_reaches_them_and_fit_the_phone(phone: Page) -> None:
    assert phone.locator(".life-panel.waiting").count() > 0
    bring_panels(phone)
    for panel in PANELS:
        expect(phone.get_by_role("heading", name=panel.title)).to_be_attached()
    for chart in ("modes-chart", "trend-chart", "stand-outs-chart", "duty-chart"):
        expect(phone.locator(f"[data-chart={chart}] .scatterlayer .trace").first).to_be_attached()
    assert phone.evaluate("document.documentElement.scrollWidth") <= 390
    assert phone.url.endswith(CHOICES)  # the address stays that of the screen


def test_a_panel_follows_the_choices(phone: Page) -> None:
    bring_panels(phone)
    phone.get_by_text("Choose", exact=True).click()
    phone.get_by_label("How sure").select_option("0.8")
    expect(phone.get_by_text("we are 80 % sure", exact=False).first).to_be_visible()
    bring_panels(phone)
    panel = phone.locator("#panel-modes")
    panel.scroll_into_view_if_needed()  # where it came only now, it is asked for now
    expect(panel).to_contain_text(re.compile(r"80.%.sure of each range"), timeout=20_000)


def test_without_scripts_each_panel_is_a_link(browser: Browser, live_server: Any, worked: WorkedFleet) -> None:
    context = browser.new_context(java_script_enabled=False)
    sign_in(context, live_server)
    page = context.new_page()
    page.goto(f"{live_server.url}/life/?{CHOICES}")
    page.locator("#panel-modes").get_by_role("link", name="Show").click()
    expect(page.get_by_role("rowheader", name="Thread worn out")).to_be_visible()
    page.get_by_role("link", name="Life", exact=True).last.click()
    expect(page).to_have_url(re.compile("as_of="))
    context.close()


@pytest.mark.parametrize("query", ["", "&by=site", "&by=lot", "&mode=WORN", "&component=BEARING", "&confidence=0.99"])
def test_two_sheets_whatever_is_chosen(phone: Page, live_server: Any, query: str) -> None:
    phone.set_viewport_size({"width": 680, "height": 960})
    asked = CHOICES.replace("component=NUT", "component=BEARING") if "BEARING" in query else CHOICES + query
    phone.goto(f"{live_server.url}/life/print/?{asked}")
    expect(phone.locator("[data-chart=survival] .scatterlayer path.js-line").first).to_be_attached()
    pages = len(re.findall(rb"/Type /Page\b", phone.pdf(format="A4", prefer_css_page_size=True)))
    assert pages == 2
    phone.emulate_media(media="print")
    sheet = phone.locator(".life-sheet").first.bounding_box()
    widest = phone.evaluate(
        "Math.max(...[...document.querySelectorAll('.life-sheet *')].map(e => e.getBoundingClientRect().right))"
    )
    assert sheet is not None
    assert widest <= sheet["x"] + sheet["width"] + 1  # nothing is cut at the edge of the paper
