"""Cast: Ines, a manager who asks on her phone what planned replacement would change; and a reader without scripts."""

from __future__ import annotations

import re
from collections.abc import Iterator
from typing import Any

import pytest
from django.conf import settings
from django.test import Client
from django.utils import timezone
from playwright.sync_api import Browser, Page, expect

from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.models import Fitting, Placement
from tests.factories import make_manager
from tests.reliability.kept_forecasts import make_kept_forecast
from tests.reliability.small_fleet import SmallFleet, day
from tests.reliability.test_forecast import AS_OF, lived_fleet

pytestmark = [pytest.mark.browser, pytest.mark.django_db(transaction=True)]


@pytest.fixture
def nuts(transactional_db: None) -> SmallFleet:
    """A fleet whose last day is today: browser and server tell the time by themselves."""
    fleet = lived_fleet(12)
    later = timezone.localdate() - day(AS_OF)
    for placement in Placement.objects.all():
        placement.from_on += later
        placement.save()
    for fitting in Fitting.objects.order_by("-fitted_on"):
        fitting.fitted_on += later
        fitting.removed_on = fitting.removed_on and fitting.removed_on + later
        fitting.save()
    rebuild_clocks()
    return fleet


def sign_in(context: Any, live_server: Any) -> None:
    client = Client()
    client.force_login(make_manager(code="INES"))
    cookie = {"name": settings.SESSION_COOKIE_NAME, "value": client.cookies[settings.SESSION_COOKIE_NAME].value}
    context.add_cookies([{**cookie, "url": live_server.url}])


@pytest.fixture
def phone(page: Page, context: Any, live_server: Any, nuts: SmallFleet) -> Page:
    sign_in(context, live_server)
    page.set_viewport_size({"width": 390, "height": 844})
    page.goto(f"{live_server.url}/forecast/")
    return page


def is_as_wide_as_the_phone(page: Page) -> bool:
    return bool(page.evaluate("document.documentElement.scrollWidth <= window.innerWidth"))


def test_a_what_if_on_the_phone_stands_beside_the_base_case_and_in_the_address(phone: Page) -> None:
    expect(phone.locator("[data-chart=weekly] .scatterlayer path.js-line").first).to_be_attached()
    expect(phone.locator("[data-chart=ages] .barlayer .point").first).to_be_attached()
    assert is_as_wide_as_the_phone(phone)
    phone.get_by_label("Replace as planned at, days").fill("40")
    phone.locator("#what-if").get_by_role("button", name="Compare").click()
    expect(phone).to_have_url(re.compile("replace_at=40"))
    expect(phone.get_by_role("heading", name="Beside the base case")).to_be_visible()
    expect(phone.locator("form.whatif .changed")).to_contain_text("Replaced as planned at 40 days")
    expect(phone.get_by_label("Replace as planned at, days")).to_have_value("40")
    assert is_as_wide_as_the_phone(phone)
    touched = phone.locator("#what-if").get_by_role("button", name="Compare").bounding_box()
    assert touched is not None
    assert touched["height"] >= 44
    phone.get_by_role("link", name="Base case").click()
    expect(phone.get_by_role("heading", name="Beside the base case")).to_have_count(0)


def test_a_figure_that_cannot_be_assumed_is_told_at_its_field(phone: Page) -> None:
    phone.get_by_label("Use of every module, times").fill("0")
    phone.locator("#what-if").get_by_role("button", name="Compare").click()
    expect(phone.get_by_text("Times 0 is no use.")).to_be_visible()
    expect(phone.get_by_label("Use of every module, times")).to_have_attribute("aria-invalid", "true")


def test_keeping_goes_to_its_own_page(phone: Page) -> None:
    phone.get_by_label("Note").fill("for the autumn order")
    phone.get_by_role("button", name="Keep this forecast").click()
    expect(phone).to_have_url(re.compile(r"/forecast/kept/\d+/"))
    expect(phone.get_by_text("for the autumn order")).to_be_visible()
    expect(phone.get_by_text("No whole week of it has passed yet.")).to_be_visible()
    assert is_as_wide_as_the_phone(phone)


@pytest.fixture
def without_scripts(browser: Browser, live_server: Any, nuts: SmallFleet) -> Iterator[Page]:
    context = browser.new_context(java_script_enabled=False, viewport={"width": 390, "height": 844})
    sign_in(context, live_server)
    page = context.new_page()
    page.goto(f"{live_server.url}/forecast/?component=NUT")
    yield page
    context.close()


def test_without_scripts_the_figures_and_the_what_ifs_are_there(without_scripts: Page) -> None:
    page = without_scripts
    page.locator("summary", has_text="As a table").first.click()
    expect(page.get_by_role("columnheader", name="Week from")).to_be_visible()
    page.get_by_label("Replace as planned at, days").fill("40")
    page.locator("#what-if").get_by_role("button", name="Compare").click()
    expect(page.get_by_role("heading", name="Beside the base case")).to_be_visible()


@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_nothing_that_hinders_reading(phone: Page, live_server: Any, nuts: SmallFleet, scheme: str) -> None:
    """The rules of WCAG 2.2 A and AA as axe-core checks them."""
    from axe_playwright_python.sync_playwright import Axe

    kept = make_kept_forecast(component=nuts.component, made_by=make_manager())
    phone.emulate_media(color_scheme=scheme)
    rules = {"runOnly": ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa"]}
    for address in (
        "?component=NUT&of=NUT&replace_at=40",
        "?component=NUT&duty=0",
        "?component=NUT&as=print",
        "kept/",
        f"kept/{kept.pk}/",
        "planned-replacement/NUT/?planned_cost=40&failure_cost=400",
    ):
        phone.goto(f"{live_server.url}/forecast/{address}")
        found = Axe().run(phone, options=rules)
        assert found.violations_count == 0, found.generate_report()
