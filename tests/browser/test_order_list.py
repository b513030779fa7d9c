"""Otto orders on a tablet: the list says what to order, he changes a number, and one order holds what he ticked."""

from __future__ import annotations

from typing import Any

import pytest
from django.conf import settings
from django.test import Client
from django.utils import timezone
from playwright.sync_api import Page, expect

from fleet.models import BenchCapacity, SupplyOrder, Work
from fleet.work import run_here
from reliability.models import KeptResult
from tests.factories import make_planner
from tests.reliability import supply_fleet
from tests.reliability.supply_fleet import SupplyFleet

pytestmark = [pytest.mark.browser, pytest.mark.django_db(transaction=True)]
TABLET, PHONE = {"width": 820, "height": 1180}, {"width": 390, "height": 844}
LEAST = 44  # px, for a hand in a glove


@pytest.fixture
def world(transactional_db: None) -> SupplyFleet:
    found = SupplyFleet(modules=12, on_hand=1)
    monday = timezone.localdate() - supply_fleet.dt.timedelta(days=timezone.localdate().weekday())
    for place in range(14):
        BenchCapacity.objects.create(week=monday + supply_fleet.dt.timedelta(weeks=place), hours=10)
    supply_fleet.count_today()
    return found


@pytest.fixture
def otto(page: Page, live_server: Any, world: SupplyFleet) -> Page:
    client = Client()
    client.force_login(make_planner(code="OTTO"))
    value = client.cookies[settings.SESSION_COOKIE_NAME].value
    page.context.add_cookies([{"name": settings.SESSION_COOKIE_NAME, "value": value, "url": live_server.url}])
    page.set_viewport_size(TABLET)  # type: ignore[arg-type]
    return page


def fits(page: Page) -> bool:
    return bool(page.evaluate("document.documentElement.scrollWidth <= window.innerWidth"))


def test_what_is_ticked_is_ordered_with_the_number_that_stands_there(otto: Page, live_server: Any) -> None:
    otto.goto(f"{live_server.url}/stores/")
    otto.get_by_role("link", name="What to order").click()
    expect(otto.get_by_role("heading", level=1)).to_contain_text("Order list")
    assert fits(otto)
    tick = otto.get_by_label("N2 to be ordered")
    pieces = otto.get_by_label("How many of N2")
    box = pieces.bounding_box()
    assert box is not None
    assert box["height"] >= LEAST
    if not tick.is_checked():
        tick.check()
    otto.get_by_label("N1 to be ordered").uncheck()
    pieces.fill("")
    otto.get_by_role("button", name="Order all ticked lines").click()
    expect(otto.get_by_text("How many? Write the number")).to_be_visible()
    otto.get_by_label("How many of N2").fill("35")
    otto.get_by_role("button", name="Order all ticked lines").click()
    expect(otto.get_by_text("is placed: 1")).to_be_visible()
    order = SupplyOrder.objects.latest("pk")
    assert dict(order.lines.values_list("part__code", "quantity")) == {"N2": 35}


def test_filters_follow_without_a_reload_and_ticks_still_work(otto: Page, live_server: Any) -> None:
    otto.goto(f"{live_server.url}/stores/order/")
    otto.get_by_label("Number or name").fill("n2")
    expect(otto.get_by_label("N1 to be ordered")).to_have_count(0)
    otto.get_by_label("N2 to be ordered").check()
    otto.get_by_label("How many of N2").fill("10")
    otto.get_by_role("button", name="Order all ticked lines").click()
    expect(otto.get_by_text("is placed: 1")).to_be_visible()


def test_the_list_comes_by_itself_when_the_background_has_counted(otto: Page, live_server: Any) -> None:
    KeptResult.objects.all().delete()
    otto.goto(f"{live_server.url}/stores/order/")
    expect(otto.get_by_text("is being counted in the background")).to_be_visible()
    run_here(Work.objects.get())
    expect(otto.get_by_label("N2 to be ordered")).to_be_visible()
    expect(otto.locator("#order-lead")).to_contain_text("ordered today")
    expect(otto.get_by_text("is being counted in the background")).to_have_count(0)


def test_the_bench_draws_its_forecast_and_the_other_pages_fit_a_tablet_and_a_phone(
    otto: Page, live_server: Any, world: SupplyFleet
) -> None:
    world.job(900, 890)
    otto.goto(f"{live_server.url}/bench/")
    expect(otto.locator("#backlog .js-plotly-plot").first).to_be_visible(timeout=20_000)
    assert fits(otto)
    for size in (TABLET, PHONE):
        otto.set_viewport_size(size)  # type: ignore[arg-type]
        for address in ("/stores/order/", "/stores/places/", "/bench/backlog/?more_hours=5", "/stores/BOX/"):
            otto.goto(f"{live_server.url}{address}")
            otto.wait_for_load_state("networkidle")
            assert fits(otto), f"{address} at {size['width']}"
