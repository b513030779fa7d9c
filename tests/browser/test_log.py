"""Cast: Cleo, a crew member with a 390 px phone and wet gloves, at a carriage with a nut and a screw."""

from __future__ import annotations

import datetime as dt
from collections.abc import Callable
from typing import Any

import pytest
from django.conf import settings
from django.test import Client
from django.urls import reverse
from playwright.sync_api import Browser, Locator, Page, expect

from fleet.actions.entries import CounterEntry
from fleet.actions.record_reading import record_reading
from fleet.models import Finding, Fitting, Reading, Stop, Visit
from tests.factories import Carriage

pytestmark = [pytest.mark.browser, pytest.mark.django_db(transaction=True)]
PHONE = {"width": 390, "height": 844}


@pytest.fixture
def weir(transactional_db: None) -> Carriage:
    carriage = Carriage(code="KM-1")
    carriage.nuts.name, carriage.screws.name = "drive nut", "lead screw"
    carriage.nuts.save()
    carriage.screws.save()
    carriage.type.cautions = "Isolate and lock out. The screw is under tension."
    carriage.type.save()
    carriage.fit(carriage.n1, "2026-01-10")
    carriage.fit(carriage.s1, "2026-01-10")
    read_at = dt.datetime(2026, 1, 11, 9, 0, tzinfo=dt.UTC)
    record_reading(by=carriage.crew, module=carriage.module, read_at=read_at, counter=CounterEntry(strokes=51_877))
    return carriage


def sign_in(context: Any, live_server: Any, weir: Carriage) -> None:
    client = Client()
    client.force_login(weir.crew)
    cookie = {"name": settings.SESSION_COOKIE_NAME, "value": client.cookies[settings.SESSION_COOKIE_NAME].value}
    context.add_cookies([{**cookie, "url": live_server.url}])


@pytest.fixture
def phone(page: Page, context: Any, live_server: Any, weir: Carriage) -> Page:
    sign_in(context, live_server, weir)
    page.set_viewport_size(PHONE)
    return page


@pytest.fixture
def plain_phone(browser: Browser, live_server: Any, weir: Carriage) -> Any:
    """The same phone without scripts."""
    context = browser.new_context(viewport=PHONE, java_script_enabled=False)
    sign_in(context, live_server, weir)
    yield context.new_page()
    context.close()


class Taps:
    """Counts every tap, and checks that what is tapped is large enough for a glove."""

    def __init__(self) -> None:
        self.count = 0

    def __call__(self, target: Locator) -> None:
        box = target.bounding_box()
        assert box is not None
        assert box["height"] >= 44, f"{target} is {box['height']} px high"
        assert box["x"] >= 0
        assert box["x"] + box["width"] <= PHONE["width"]
        target.click()
        self.count += 1


def position(page: Page, name: str) -> Locator:
    return page.locator(".log-position > summary", has_text=name)


def tile(page: Page, words: str) -> Locator:
    return page.locator(".tile:visible", has_text=words).first


def button(page: Page, name: str) -> Locator:
    return page.get_by_role("button", name=name)


def open_log(page: Page, live_server: Any) -> None:
    page.goto(live_server.url + reverse("log_visit", args=["KM-1"]))


def test_the_usual_nut_change_takes_five_taps_and_one_number(phone, live_server, weir):
    tap = Taps()
    phone.goto(live_server.url + "/m/KM-1")
    tap(phone.get_by_role("link", name="Log a visit"))
    expect(phone.locator("summary", has_text="Isolate and lock out.")).to_be_visible()
    tap(position(phone, "drive nut"))
    tap(tile(phone, "Failed"))
    tap(tile(phone, "thread worn out"))
    expect(phone.locator("[name=strokes]")).to_be_focused()
    phone.keyboard.type("58210")
    tap(button(phone, "Done"))
    expect(phone.get_by_text("Recorded: drive nut failed (thread worn out)")).to_be_visible()
    assert tap.count == 5
    visit = Visit.objects.get()
    assert Fitting.objects.get(removed_visit=visit).mode == weir.worn
    assert Fitting.objects.get(fitted_visit=visit).part == weir.n2
    assert Reading.objects.get(visit=visit).strokes == 58_210


def test_all_well_mended_and_no_spare_are_as_quick(phone, live_server, weir):
    ways: list[tuple[list[Callable[[], Locator]], str]] = [
        ([lambda: tile(phone, "All well"), lambda: button(phone, "Done")], "all well"),
        (
            [lambda: position(phone, "drive nut"), lambda: tile(phone, "Adjusted"), lambda: button(phone, "Done")],
            "drive nut adjusted",
        ),
        (
            [
                lambda: position(phone, "drive nut"),
                lambda: tile(phone, "Failed"),
                lambda: tile(phone, "thread worn out"),
                lambda: button(phone, "Left stopped, no spare"),
            ],
            "left empty; left stopped",
        ),
    ]
    for steps, told in ways:
        open_log(phone, live_server)
        for step in steps:
            Taps()(step())
        expect(phone.locator(".message")).to_contain_text(told)
    assert Visit.objects.count() == 3
    assert Finding.objects.get().finding == "adjusted"
    assert Stop.objects.get().running_at is None


def test_several_positions_with_the_likely_cause_ready(phone, live_server, weir):
    open_log(phone, live_server)
    position(phone, "lead screw").click()
    tile(phone, "Failed").click()
    tile(phone, "screw bowed").click()
    button(phone, "Another position").click()
    expect(position(phone, "lead screw")).to_contain_text("failed, screw bowed")
    position(phone, "drive nut").click()
    tile(phone, "Taken with another part").click()
    expect(phone.get_by_role("radio", name="lead screw")).to_be_checked()
    button(phone, "Next").click()
    button(phone, "Done").click()
    expect(phone.get_by_text("Recorded:")).to_be_visible()
    assert Fitting.objects.get(reason="taken with another").caused_by.position == weir.screw


def test_a_lower_counter_brings_the_question_with_everything_kept(phone, live_server, weir):
    open_log(phone, live_server)
    position(phone, "drive nut").click()
    tile(phone, "Failed").click()
    tile(phone, "thread worn out").click()
    phone.keyboard.type("48 210")
    button(phone, "Done").click()
    expect(phone.get_by_role("alert")).to_contain_text("Was the counter changed?")
    expect(phone.locator("[name=strokes]")).to_have_value("48 210")
    expect(position(phone, "drive nut")).to_contain_text("failed, thread worn out")
    tile(phone, "It was set back to nought").click()
    button(phone, "Done").click()
    expect(phone.get_by_text("Recorded:")).to_be_visible()
    assert Reading.objects.latest("read_at").restarts == "reset"
    assert Visit.objects.count() == 1


def test_a_double_tap_records_once(phone, live_server, weir):
    open_log(phone, live_server)
    tile(phone, "All well").click()
    button(phone, "Done").dblclick()
    expect(phone.get_by_text("Recorded: all well")).to_be_visible()
    assert Visit.objects.count() == 1


def test_without_signal_the_entry_stays_on_the_page_and_goes_out_later(phone, context, live_server, weir):
    open_log(phone, live_server)
    tile(phone, "All well").click()
    phone.locator("[name=strokes]").fill("60000")
    context.set_offline(True)
    button(phone, "Done").click()
    expect(phone.get_by_text("No signal: nothing was sent.")).to_be_visible()
    expect(phone.locator("[name=strokes]")).to_have_value("60000")
    context.set_offline(False)
    button(phone, "Done").click()
    expect(phone.get_by_text("Recorded: all well")).to_be_visible()
    assert Visit.objects.count() == 1


def test_the_phones_own_back_goes_one_step_back(phone, live_server, weir):
    open_log(phone, live_server)
    position(phone, "drive nut").click()
    tile(phone, "Failed").click()
    expect(phone.get_by_text("How did the drive nut fail?")).to_be_visible()
    phone.go_back()
    expect(phone.get_by_text("What happened at the drive nut?")).to_be_visible()
    phone.go_back()
    expect(phone.get_by_text("What did you work on?")).to_be_visible()


def test_by_keyboard_alone(phone, live_server, weir):
    open_log(phone, live_server)
    position(phone, "drive nut").focus()
    phone.keyboard.press("Enter")
    expect(phone.get_by_text("What happened at the drive nut?")).to_be_visible()
    phone.get_by_role("radio", name="Failed", exact=True).focus()
    phone.keyboard.press("Space")
    phone.keyboard.press("ArrowDown")  # looks around without leaving the question
    phone.keyboard.press("ArrowUp")
    expect(phone.get_by_text("What happened at the drive nut?")).to_be_visible()
    phone.keyboard.press("Enter")
    phone.get_by_role("radio", name="thread worn out").focus()
    phone.keyboard.press("Space")
    phone.keyboard.press("Enter")
    expect(phone.locator("[name=strokes]")).to_be_focused()
    phone.keyboard.type("60000")
    phone.keyboard.press("Enter")
    expect(phone.get_by_text("Recorded:")).to_be_visible()
    assert Fitting.objects.get(reason="failed").mode == weir.worn


def test_one_plain_page_without_scripts(plain_phone, live_server, weir):
    open_log(plain_phone, live_server)
    position(plain_phone, "drive nut").click()
    plain_phone.locator(f"[name=p{weir.nut.pk}-outcome][value=failed]").check()
    plain_phone.locator(f"[name=p{weir.nut.pk}-mode][value='{weir.worn.pk}']").check()
    plain_phone.locator("[name=strokes]").fill("58210")
    button(plain_phone, "Done").click()
    expect(plain_phone.get_by_text("Recorded: drive nut failed")).to_be_visible()
    assert Fitting.objects.running().get(position=weir.nut).part == weir.n2
    expect(plain_phone.locator("svg.lifelines-narrow")).to_be_visible()


def test_the_module_is_found_by_a_part_of_its_site(phone, live_server, weir):
    phone.goto(live_server.url + reverse("log"))
    phone.keyboard.type(weir.site.code[:4].lower())
    phone.get_by_role("link", name="KM-1").click()
    expect(phone.get_by_role("heading", name="Log KM-1")).to_be_visible()


@pytest.mark.parametrize("width", [360, 390, 820, 1440, 1920])
@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_no_page_of_the_module_scrolls_sideways(phone, live_server, weir, width, scheme):
    phone.emulate_media(color_scheme=scheme)
    phone.set_viewport_size({"width": width, "height": 800})
    for name in ("module", "log_visit", "report_stop", "read_counter"):
        phone.goto(live_server.url + reverse(name, args=["KM-1"]))
        assert phone.evaluate("document.documentElement.scrollWidth") <= width, name


@pytest.mark.parametrize("name", ["module", "log_visit", "report_stop", "read_counter"])
@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_nothing_that_hinders_reading_or_tapping(phone, live_server, weir, name, scheme):
    """The rules of WCAG 2.2 A and AA as axe-core checks them."""
    from axe_playwright_python.sync_playwright import Axe

    phone.emulate_media(color_scheme=scheme)
    phone.goto(live_server.url + reverse(name, args=["KM-1"]))
    if name == "log_visit":
        position(phone, "drive nut").click()
    rules = {"runOnly": ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa"]}
    found = Axe().run(phone, options=rules).response["violations"]
    assert not found, [(rule["id"], [node["html"][:120] for node in rule["nodes"]][:3]) for rule in found]
