"""What-ifs on the Forecast screen: beside the base case, with the difference and its band, all in the address."""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterator
from typing import Any

import pytest
import time_machine
from django.test import Client

from fleet.models import Component, Part
from reliability import forecast_what_if_words as words
from reliability.forecasts.what_if import WhatIf
from tests.factories import make_book, make_manager, make_planner
from tests.reliability.small_fleet import SmallFleet, day
from tests.reliability.test_forecast import AS_OF, lived_fleet

pytestmark = pytest.mark.django_db


@pytest.fixture(autouse=True)
def _the_day_up_to_which_the_fleet_lived() -> Iterator[None]:
    with time_machine.travel(dt.datetime.combine(day(AS_OF), dt.time(12), dt.UTC), tick=False):
        yield


@pytest.fixture
def manager(client: Client) -> Client:
    client.force_login(make_manager())
    return client


def told(client: Client, query: str) -> dict[str, Any]:
    found: dict[str, Any] = client.get(f"/forecast/?{query}&as=json").json()
    return found


def shown(client: Client, query: str) -> str:
    answer = client.get(f"/forecast/?{query}")
    assert answer.status_code == 200
    return answer.content.decode().replace("\u00a0", " ")


# --- beside the base case ---


def test_planned_replacement_stands_beside_the_base_case_with_its_difference(manager: Client) -> None:
    lived_fleet(20)
    found = told(manager, "component=NUT&of=NUT&replace_at=40")
    (base,), changed, difference = found["forecasts"], found["what_if"], found["difference"]
    assert changed["what_if"] == {"replace_at": 40.0}
    assert changed["total"]["mean"] < base["total"]["mean"]
    assert changed["planned"]["mean"] > base["planned"]["mean"]
    assert difference["failures"]["mean"] == pytest.approx(changed["total"]["mean"] - base["total"]["mean"], abs=0.5)
    page = shown(manager, "component=NUT&of=NUT&replace_at=40")
    assert "Replaced as planned at 40 days:" in page
    assert "fewer in 80 of 100) Drive nuts failing by" in page
    for row in ("Base case", "With this", "Difference", "Planned replacements", "Parts to plan for, 95 of 100"):
        assert row in page
    assert '"name": "base case"' in page


def test_without_assumptions_nothing_is_compared(manager: Client) -> None:
    lived_fleet(6)
    page = shown(manager, "component=NUT")
    assert "Beside the base case" not in page
    assert '"name": "base case"' not in page


def test_the_whole_question_stays_in_the_address_of_files_print_and_keeping(manager: Client) -> None:
    lived_fleet(6)
    query = "component=NUT&of=NUT&replace_at=40&service=90"
    page = manager.get(f"/forecast/?{query}").content.decode()
    for kind in ("csv", "json", "print"):
        assert f'href="?component=NUT&amp;of=NUT&amp;replace_at=40&amp;service=90&amp;as={kind}"' in page
    assert 'action="/forecast/keep/?component=NUT&amp;of=NUT&amp;replace_at=40&amp;service=90"' in page
    sheet = shown(manager, f"{query}&as=print")
    assert "Beside the base case" in sheet
    assert "do not certify" in sheet
    lines = b"".join(manager.get(f"/forecast/?{query}&as=weeks.csv").streaming_content).decode().splitlines()
    assert lines[0].endswith("from_95,to_95,expected_base_case")
    assert len(lines) == 14


def test_a_kept_what_if_holds_its_base_case_and_difference(manager: Client) -> None:
    lived_fleet(6)
    manager.post("/forecast/keep/?component=NUT&of=NUT&replace_at=40", {"note": ""})
    page = manager.get("/forecast/kept/").content.decode().replace("\u00a0", " ")
    assert "replaced as planned at 40 days" in page
    from reliability.models import KeptForecast

    document = KeptForecast.objects.get().document
    assert document["base"]["what_if"] == {}
    assert document["difference"]["failures"]["mean"] < 0


def test_another_service_level_changes_what_to_plan_for_alone(manager: Client) -> None:
    lived_fleet(12)
    usual, higher = shown(manager, "component=NUT"), shown(manager, "component=NUT&service=99.5")
    assert "is enough in 95 of 100" in usual
    assert "is enough in 995 of 1 000" in higher
    assert "Beside the base case" not in higher
    head = b"".join(manager.get("/forecast/?service=99.5&as=csv").streaming_content).decode().splitlines()[0]
    assert "plan_for_99.5" in head


def test_the_usual_service_level_is_the_books(manager: Client) -> None:
    lived_fleet(6)
    make_book(service_level=0.9)
    assert "is enough in 90 of 100" in shown(manager, "component=NUT")


def test_what_belongs_to_one_component_is_not_carried_to_another(manager: Client) -> None:
    fleet = lived_fleet(6)
    screws = Component.objects.create(code="SCREW", name="Lead screw", clock="days")
    Part.objects.create(code="S1", component=screws)
    answer = manager.get(f"/forecast/?component=SCREW&of={fleet.component.code}&replace_at=40&superseding=N2")
    assert answer.status_code == 200
    assert not answer.context["what_if"].in_use
    assert "No Lead screw runs in the field" in answer.content.decode()


# --- bad input, on the field ---


@pytest.mark.parametrize(
    ("query", "field"),
    [
        ("duty=0", "duty"),
        ("duty=-1", "duty"),
        ("duty=11", "duty"),
        ("duty=1e-320", "duty"),
        ("replace_at=1e-320", "replace_at"),
        ("duty=much", "duty"),
        ("replace_at=0", "replace_at"),
        ("replace_at=nan", "replace_at"),
        ("superseding=S1", "superseding"),
        ("superseding_from=2190-01-01", "superseding"),
        ("retrofit_a_week=3", "superseding"),
        ("superseding=N2&retrofit_a_week=0", "retrofit_a_week"),
        ("superseding=N2&superseding_from=soon", "superseding_from"),
    ],
)
def test_what_cannot_be_assumed_is_refused_and_the_base_case_stays(manager: Client, query: str, field: str) -> None:
    fleet = SmallFleet()
    fleet.fit(fleet.module("M-1", fleet.site()), 10)
    Part.objects.create(code="S1", component=Component.objects.create(code="SCREW", clock="days"))
    answer = manager.get(f"/forecast/?component=NUT&of=NUT&{query}")
    assert answer.status_code == 422
    assert list(answer.context["what_if"].errors) == [field]
    assert "By the design fitted now" in answer.content.decode()


@pytest.mark.parametrize(
    ("query", "field", "said"),
    [
        ("begin=2190-01-01", "begin", "more than two years ahead"),
        ("begin={day}&end={before}", "end", "lies before the first"),
        ("begin={day}&end={far}", "end", "more than a year"),
        ("end={day}", "begin", "from which day"),
        ("component=SAIL", "component", "no such component"),
        ("site=NOWHERE", "site", "no field site of yours"),
        ("service=49", "service", "no plan"),
        ("service=100", "service", "enough for certain"),
    ],
)
def test_what_cannot_be_asked_is_refused_on_its_field(manager: Client, query: str, field: str, said: str) -> None:
    SmallFleet()
    days = {"day": day(AS_OF + 60), "before": day(AS_OF + 50), "far": day(AS_OF + 60 + 3 * 365)}
    answer = manager.get(f"/forecast/?{query.format(**days)}")
    assert answer.status_code == 422
    assert list(answer.context["form"].errors) == [field]
    assert said in answer.content.decode()


def test_a_planner_of_one_site_counts_only_that(client: Client) -> None:
    fleet = lived_fleet(12)
    from fleet.models import Site

    client.force_login(make_planner(sites=[Site.objects.get(code="LOCK")]))
    (mine,) = told(client, "component=NUT")["forecasts"]
    assert (mine["sites"], mine["positions"]) == (["LOCK"], 6)
    page = client.get("/forecast/?component=NUT&of=NUT&replace_at=40").content.decode()
    assert "WEIR" not in page
    assert client.get("/forecast/?site=WEIR").status_code == 422
    assert fleet.component.code == "NUT"


# --- words ---


def change(mean: float, low: int, high: int) -> str:
    return words.fewer({"mean": mean, "bands": {"0.8": [low, high]}}).replace("\u00a0", " ")


def test_a_difference_is_told_with_its_band() -> None:
    assert change(-61.2, -85, -38) == "61 fewer (38 to 85 fewer in 80 of 100)"
    assert change(12.4, 3, 22) == "12.4 more (3 to 22 more in 80 of 100)"
    assert change(-2.0, -9, 4) == "2.0 fewer (from 9 fewer to 4 more in 80 of 100)"
    assert change(0.0, 0, 0) == "no change"


def test_every_assumption_is_named() -> None:
    from datetime import date

    asked = WhatIf(1.2, 45.0, "N4", date(2027, 2, 1), 12.0)
    assert words.assumed(asked, "days").replace("\u00a0", " ") == (
        "use times 1.2, replaced as planned at 45 days, N4 from 1 February 2027 with 12 working ones changed a week"
    )
    assert words.assumed(WhatIf(), "days") == ""


def test_the_worker_counts_at_the_books_service_level(manager: Client) -> None:
    from fleet.models import Work
    from reliability.forecasts.works import count_forecasts
    from reliability.models import KeptResult

    lived_fleet(6)
    make_book(service_level=0.9)
    count_forecasts(Work(), type("Silent", (), {"step": lambda *_: None})())
    before = KeptResult.objects.filter(kind="forecast").count()
    shown(manager, "component=NUT")
    assert KeptResult.objects.filter(kind="forecast").count() == before == 1
