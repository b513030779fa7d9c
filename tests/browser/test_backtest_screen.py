"""Cast: Ines, a manager, who has past forecasts judged and watches until the answer stands there, without a reload."""

from __future__ import annotations

from typing import Any

import pytest
from playwright.sync_api import Page, expect

from fleet.models import Work
from fleet.work import run_here
from reliability.forecasts.backtest import KIND, document_of, keep
from reliability.kept import key_of
from tests.browser.test_life_screen import sign_in
from tests.factories import make_component
from tests.reliability.test_backtest_screen import BEGINS, quarter

pytestmark = [pytest.mark.browser, pytest.mark.django_db(transaction=True)]


def test_begun_followed_stopped_and_read(
    page: Page, context: Any, live_server: Any, monkeypatch: pytest.MonkeyPatch
) -> None:
    nut = make_component(code="NUT", name="drive nut")
    sign_in(context, live_server)
    page.goto(f"{live_server.url}/forecast/backtest/")
    page.get_by_role("button", name="Judge past forecasts").click()
    expect(page.get_by_text("Waiting")).to_be_visible()
    page.get_by_role("button", name="Stop it").click()
    expect(page.get_by_text("Stopped before it began.")).to_be_visible()
    page.get_by_role("button", name="Judge past forecasts").click()
    expect(page.get_by_role("progressbar")).to_be_visible()

    document = document_of(nut, 8, [quarter(begin, 20) for begin in BEGINS])
    monkeypatch.setattr("reliability.forecasts.backtest.backtest", lambda *args, **how: kept(document))
    assert run_here(Work.objects.filter(state="waiting").get()).state == "done"

    expect(page.get_by_text("In the last 8 quarters 8 actual figures lay within the 80")).to_be_visible()
    expect(page.locator("[data-chart=backtest] .barlayer .point").first).to_be_attached()
    assert page.locator("[data-chart=backtest] .barlayer .point").count() == 24


def kept(document: dict[str, Any]) -> list[dict[str, Any]]:
    keep(KIND, key_of({"component": document["component"]}), 0, document)
    return [document]
