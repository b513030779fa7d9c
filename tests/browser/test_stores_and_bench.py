"""One story, told by three: a module fails, a part is issued, the bench mends it, and it goes back to its site.

Cast: Otto the storekeeper at his desk, Cleo the crew on her phone, Greta at the bench with a tablet.
"""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import pytest
from django.conf import settings
from django.test import Client
from playwright.sync_api import Browser, Page, expect

from fleet.actions.rebuild_balances import ledger_sums
from fleet.bench import pool
from fleet.models import BenchJob, Fitting, Module, Person, Placement, Site, StockMove, Store, SupplyOrder
from fleet.module_clock import ModuleClock
from tests.factories import Carriage, make_bench, make_depot, make_planner, make_store
from tests.fleet.invariants import broken_rules
from tests.fleet.invariants_stock import broken_stock_rules

pytestmark = [pytest.mark.browser, pytest.mark.django_db(transaction=True)]
DESK, PHONE, TABLET = {"width": 1440, "height": 900}, {"width": 390, "height": 844}, {"width": 820, "height": 1180}
LEAST = 44  # px, for a hand in a glove


@pytest.fixture
def weir(transactional_db: None) -> Carriage:
    carriage = Carriage(code="KM-1")
    carriage.nuts.name, carriage.screws.name = "drive nut", "lead screw"
    carriage.nuts.save()
    carriage.screws.save()
    carriage.fit(carriage.n1, "2026-01-10")
    carriage.fit(carriage.s1, "2026-01-10")
    return carriage


@pytest.fixture
def yard(weir: Carriage) -> Site:
    return make_depot(code="YARD", name="The yard")


@pytest.fixture
def van(weir: Carriage) -> Store:
    return make_store(code="VAN-C", name="Van of Cleo", person=weir.crew)


@pytest.fixture
def shelf(yard: Site) -> Store:
    return make_store(code="SHELF", name="Yard shelf", site=yard)


class Devices:
    """A browser window a person, each watched for what the content policy blocks."""

    def __init__(self, browser: Browser, live_server: Any) -> None:
        self.browser, self.url = browser, live_server.url
        self.contexts: list[Any] = []
        self.complaints: list[str] = []

    def of(self, person: Person, size: Any, *, touch: bool = False) -> Page:
        context = self.browser.new_context(viewport=size, has_touch=touch, locale="en-GB")
        client = Client()
        client.force_login(person)
        value = client.cookies[settings.SESSION_COOKIE_NAME].value
        context.add_cookies([{"name": settings.SESSION_COOKIE_NAME, "value": value, "url": self.url}])
        context.on("weberror", lambda error: self.complaints.append(str(error.error)))
        context.on("console", self.watch)
        self.contexts.append(context)
        page = context.new_page()
        page.set_default_timeout(20_000)
        return page

    def watch(self, message: Any) -> None:
        if "Content Security Policy" in message.text:
            self.complaints.append(message.text)


@pytest.fixture
def devices(browser: Browser, live_server: Any) -> Iterator[Devices]:
    found = Devices(browser, live_server)
    yield found
    for context in found.contexts:
        context.close()
    assert not found.complaints


def press(page: Page, name: str) -> None:
    """Presses the button in sight, and holds it to the size of a thumb."""
    target = page.get_by_role("button", name=name, exact=True)
    box = target.bounding_box()
    assert box is not None
    assert box["height"] >= LEAST, f"{name} is {box['height']} px high"
    target.click()


def lies(store: Store, part: Any) -> int:
    return ledger_sums().get((store.pk, part.pk, "new"), 0)


def test_a_failed_module_goes_through_stores_and_bench_and_back(
    devices: Devices, weir: Carriage, yard: Site, shelf: Store, van: Store
) -> None:
    otto, greta = make_planner(name="Otto"), make_bench(yard, name="Greta")
    desk, phone = devices.of(otto, DESK), devices.of(weir.crew, PHONE, touch=True)
    tablet = devices.of(greta, TABLET, touch=True)
    order_and_receive(desk, devices.url, weir, shelf)
    hand_over(desk, devices.url, weir)
    assert (lies(shelf, weir.n2), lies(van, weir.n2), lies(shelf, weir.s1)) == (3, 1, 1)

    send_to_the_bench(phone, devices.url, weir)
    assert lies(van, weir.n2) == 0
    assert Fitting.objects.running().get(position=weir.nut).part == weir.n2

    mend(tablet, devices.url, weir)
    job = BenchJob.objects.get()
    assert (job.outcome, job.hours.get().hours) == ("ready", 2.5)
    assert (lies(shelf, weir.s1), StockMove.objects.get(job=job).part) == (0, weir.s1)
    assert list(pool(Module.objects.all())) == [weir.module]

    place_again(desk, devices.url, weir)
    screws = Fitting.objects.filter(position=weir.screw).order_by("fitted_on", "pk")
    assert [(each.reason, each.job) for each in screws] == [("failed", job), ("", job)]
    assert Placement.objects.current().get(module=weir.module).site == weir.site
    assert ModuleClock(weir.module, 0).points
    assert broken_rules() == broken_stock_rules() == []


def order_and_receive(desk: Page, url: str, weir: Carriage, shelf: Store) -> None:
    desk.goto(f"{url}/stores/")
    desk.get_by_role("link", name="Order parts").click()
    desk.get_by_label("Supplier").fill("Brandt")
    for row, (part, count) in enumerate(((weir.n2, "4"), (weir.s1, "1"))):
        desk.locator(f"[name=line-{row}-part]").select_option(part.code)
        desk.locator(f"[name=line-{row}-quantity]").fill(count)
    press(desk, "Place the order")
    expect(desk.locator(".lead")).to_contain_text("5 pieces still to come")
    desk.get_by_label("Into which store").select_option(label="Yard shelf")
    desk.get_by_label(f"{weir.n2.title}: 4 to come").fill("4")
    desk.get_by_label(f"{weir.s1.title}: 1 to come").fill("1")
    press(desk, "Put it on the shelf")
    expect(desk.locator(".lead")).to_contain_text("All of it came.")
    assert SupplyOrder.objects.get().supplier == "Brandt"
    assert lies(shelf, weir.n2) == 4


def hand_over(desk: Page, url: str, weir: Carriage) -> None:
    desk.goto(f"{url}/stores/SHELF/")
    desk.get_by_role("link", name="Transfer").click()
    desk.get_by_label("To which store").select_option(label="Van of Cleo")
    desk.get_by_label("Part", exact=True).select_option(weir.n2.code)
    desk.get_by_label("How many").fill("1")
    press(desk, "Hand them over")
    expect(desk.locator(".message").first).to_contain_text("handed over from Yard shelf; 3 on hand there now")


def send_to_the_bench(phone: Page, url: str, weir: Carriage) -> None:
    """The nut is changed on site; the screw is bowed, stays in, and the carriage goes to the bench."""
    phone.goto(f"{url}/m/KM-1/log")
    phone.locator(".tile.well").click()
    expect(phone.get_by_text("New parts come from")).to_be_hidden()  # nothing went in
    phone.goto(f"{url}/m/KM-1/log")
    phone.locator(".log-position > summary", has_text="drive nut").click()
    phone.locator(".tile:visible", has_text="Failed").first.click()
    phone.locator(".tile:visible", has_text="thread worn out").first.click()
    phone.locator(".log-submit").get_by_role("button", name="Another position").click()
    phone.locator(".log-position > summary", has_text="lead screw").click()
    phone.locator(".tile:visible", has_text="Failed, stays in for now").first.click()
    phone.locator(".tile:visible", has_text="screw bowed").first.click()
    phone.locator(".tile:visible", has_text="To the bench").first.click()
    expect(phone.locator(".tile:visible", has_text="Van of Cleo").first).to_be_visible()
    press(phone, "Done")
    expect(phone.locator(".messages")).to_contain_text("sent to the bench")
    expect(phone.locator(".messages")).to_contain_text(f"Taken off Van of Cleo: {weir.n2.code}")


def mend(tablet: Page, url: str, weir: Carriage) -> None:
    tablet.goto(f"{url}/bench/")
    tablet.get_by_role("link", name="Take it in").click()
    tablet.get_by_label("Why it came").fill("screw bowed")
    press(tablet, "Take it in")
    tablet.get_by_label("on the bench", exact=True).check()
    press(tablet, "Move it")
    tablet.get_by_label("Hours", exact=True).fill("2.5")
    press(tablet, "Book them")
    tablet.get_by_text("A part was changed").click()
    tablet.get_by_label("Position", exact=True).select_option(label=f"lead screw: {weir.s1.code}")
    tablet.get_by_label("Why the old one came out").select_option("failed")
    tablet.get_by_label("How it failed").select_option(label="lead screw: screw bowed")
    tablet.get_by_label("What went in").select_option(label=weir.s1.title)
    press(tablet, "Record the change")
    expect(tablet.locator(".messages")).to_contain_text("taken from Yard shelf")
    tablet.get_by_text("The job is done").click()
    tablet.get_by_label("Ready: it goes to the pool").check()
    press(tablet, "Finish the job")
    expect(tablet.locator(".messages")).to_contain_text("is ready and waits in the pool")
    tablet.goto(f"{url}/bench/")
    expect(tablet.locator(".lead")).to_contain_text("1 is ready in the pool")
    assert tablet.evaluate("document.documentElement.scrollWidth") <= TABLET["width"]


def place_again(desk: Page, url: str, weir: Carriage) -> None:
    desk.goto(f"{url}/modules/place/?module=KM-1&site={weir.site.code}")
    desk.locator("[name=site]").select_option(weir.site.code)
    desk.get_by_label("It moved twice on that day").check()
    desk.locator("main form button[type=submit]").click()
    expect(desk.locator(".messages")).to_be_visible()
    desk.goto(f"{url}/m/KM-1")
    expect(desk.locator("#jobs, .more.records", has_text="On the bench (1)").first).to_be_attached()
