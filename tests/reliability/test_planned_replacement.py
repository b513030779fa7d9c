"""Planned replacement: the age from records whose life is known, its page, and costs that are remembered."""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterator
from decimal import Decimal
from typing import Any

import pytest
import time_machine
from django.test import Client
from django.utils import timezone

from fleet.models import Component, Part, Site, Stop
from reliability import forecast_replacement_words as words
from reliability.forecasts.planned_replacement import ReplacementQuestion, replacement_document
from reliability.models import ReplacementCost
from reliability.stats.replacement import best_replacement_age
from tests.factories import make_bench, make_book, make_crew, make_manager, make_planner
from tests.reliability.small_fleet import SmallFleet, day
from tests.reliability.test_forecast import AS_OF, SCALE, SHAPE, lived_fleet

pytestmark = pytest.mark.django_db
DAY = dt.timedelta(days=1)
PAGE = "/forecast/planned-replacement/NUT/"


@pytest.fixture(autouse=True)
def _the_day_up_to_which_the_fleet_lived() -> Iterator[None]:
    with time_machine.travel(dt.datetime.combine(day(AS_OF), dt.time(12), dt.UTC), tick=False):
        yield


@pytest.fixture
def manager(client: Client) -> Client:
    client.force_login(make_manager(code="INES"))
    return client


def document(fleet: SmallFleet, planned: float = 40.0, failure: float = 400.0, **asked: Any) -> dict[str, Any]:
    question = ReplacementQuestion(
        component=fleet.component, as_of=day(AS_OF), planned_cost=planned, failure_cost=failure, **asked
    )
    return replacement_document(question)


def plain(text: str) -> str:
    return text.replace("\u00a0", " ")


# --- the age from records ---


def test_the_known_life_of_the_fleet_gives_its_best_age_and_cost() -> None:
    """Nuts live Weibull with shape 2 and scale 100 days; 60 positions, a quarter of 91 days."""
    found = document(lived_fleet())
    exact = best_replacement_age(SHAPE, SCALE, 40.0, 400.0)
    told = found["told"]
    assert (found["part"], found["positions"], found["use_a_day"]) == ("N2", 60, 60.0)
    assert told["flat"][0] <= exact.age <= told["flat"][1]
    # the story's lives are rounded to days, which the records take as rounded up: half a day and a grid's step
    assert told["age_band"][0] - 2 <= exact.age <= told["age_band"][1] + 2
    assert told["cost"] == pytest.approx(exact.cost_rate * 60 * 91, rel=0.25)
    assert told["saving_band"][0] < exact.saving < told["saving_band"][1]
    assert told["pays"]
    assert told["curve"]["lower"] <= told["curve"]["cost"] <= told["curve"]["upper"]


def test_visits_only_cost_more_and_a_site_without_parts_says_so() -> None:
    fleet = lived_fleet()
    free, visits = document(fleet)["told"], document(fleet, visit_every_days=28)["told"]
    assert visits["cost"] > free["cost"]
    assert visits["age"] < free["age"]
    assert document(fleet, sites=("NOWHERE",))["told"] is None


def test_a_failure_that_costs_no_more_never_earns_it_back() -> None:
    found = document(lived_fleet(12), planned=100.0, failure=100.0)
    assert found["told"]["age"] is None
    assert "cannot pay: a failure costs no more than a planned replacement" in words.lead(found, "nut", "EUR")
    assert words.flat(found) == ""


def test_without_a_failure_nothing_is_claimed() -> None:
    fleet = SmallFleet()
    fleet.fit(fleet.module("M-1", fleet.site()), 10)
    fleet.lives(AS_OF)
    found = document(fleet)
    assert found["told"] is None
    assert words.lead(found, "nut", "EUR") == "No N1 has failed yet. We cannot tell at which age replacing pays."


def test_few_failures_are_not_called_a_saving() -> None:
    found = document(lived_fleet(2), planned=100.0, failure=160.0)
    assert not found["told"]["pays"]
    lead = words.lead(found, "nut", "EUR")
    assert "do not show yet" in lead or "cannot pay" in lead


# --- words ---


def told(**changes: Any) -> dict[str, Any]:
    figures = {
        "age": 45.2,
        "age_band": [40.0, 52.0],
        "flat": [38.0, 55.0],
        "flat_within": 0.03,
        "cost": 3210.0,
        "never": 4870.0,
        "saving": 0.341,
        "saving_band": [0.18, 0.45],
        "pays": True,
        "level": 0.95,
        **changes,
    }
    return {
        "part": "N2",
        "clock": "days",
        "planned_cost": 40.0,
        "failure_cost": 400.0,
        "positions": 60,
        "failures_seen": 50,
        "visit_every_days": None,
        "oldest": 130.0,
        "told": figures,
    }


def test_the_sentences_name_age_money_saving_and_flat_region() -> None:
    assert plain(words.lead(told(), "drive nut", "EUR")) == (
        "Replacing drive nuts as planned at 45 days costs least: about 3 210 EUR a quarter instead of 4 870 EUR for "
        "waiting until they fail. That is 34 % less; we are 95 % sure that it lies between 18 % and 45 %."
    )
    assert plain(words.flat(told())) == (
        "Anything between 38 and 55 days costs within 3 % of the best. "
        "The best age itself lies between 40 and 52 days (95 % sure)."
    )
    assert "it could also be never" in words.flat(told(age_band=[40.0, None]))
    assert "on, even never, costs within" in words.flat(told(flat=[38.0, None]))


def test_what_is_not_shown_and_what_cannot_pay_are_told_apart() -> None:
    not_shown = plain(words.lead(told(pays=False, saving_band=[-0.12, 0.4]), "drive nut", "EUR"))
    assert "do not show yet that planned replacement pays" in not_shown
    assert "may also cost 12 % more (in 95 of 100: 12 % more to 40 % less)" in not_shown
    cannot = words.lead(told(age=None), "drive nut", "EUR")
    assert "fails no sooner than a new one" in cannot


def test_an_age_that_nobody_has_seen_is_called_extrapolated() -> None:
    assert words.beyond(told()) == ""
    assert plain(words.beyond(told(age=140.0))).startswith("The oldest part in service is 130 days old.")


def test_at_visits_the_forecast_counts_half_an_interval_later() -> None:
    at_visits = {**told(pace=2.0), "visit_every_days": 14}
    assert words.age_in_forecast(told(pace=2.0)) == 45.2
    assert words.age_in_forecast(at_visits) == 45.2 + 14.0


# --- the page ---


def test_the_page_shows_curve_flat_region_counts_and_caution(manager: Client) -> None:
    lived_fleet(12)
    page = plain(manager.get(f"{PAGE}?planned_cost=40&failure_cost=400").content.decode())
    assert 'data-chart="cost"' in page
    assert "It does not certify that a part is safe until that age" in page
    assert "failures of N2 on record" in page
    assert "Next quarter it would mean about" in page
    answer = manager.get(f"{PAGE}?planned_cost=40&failure_cost=400&as=json").json()
    assert answer["component"] == "NUT"
    lines = b"".join(manager.get(f"{PAGE}?planned_cost=40&failure_cost=400&as=csv").streaming_content).decode()
    assert lines.splitlines()[0].lstrip("\ufeff") == "component,part,clock,age,cost_a_quarter_eur,from_95,to_95"


def test_without_costs_it_asks_for_them(manager: Client) -> None:
    SmallFleet()
    answer = manager.get(PAGE)
    assert answer.status_code == 200
    assert "Enter what a planned replacement and a failure cost." in answer.content.decode()


def test_a_failure_is_pre_filled_with_part_visit_and_stop(manager: Client) -> None:
    fleet = SmallFleet()
    make_book(visit_cost=Decimal(150), stop_cost_per_day=Decimal(90))
    Part.objects.filter(code="N2").update(unit_cost=Decimal("42.50"))
    module = fleet.module("M-1", fleet.site())
    now = timezone.now()
    Stop.objects.create(module=module, stopped_at=now - 3 * DAY, running_at=now - DAY, known_on=now.date())
    form = manager.get(PAGE).context["form"]
    assert (form["planned_cost"].value(), form["failure_cost"].value()) == ("42.50", f"{42.5 + 150 + 2 * 90:.2f}")
    assert "the part 42.50, a visit 150.00 and 2.0 days of a stop at 90.00" in plain(form["failure_cost"].help_text)


@pytest.mark.parametrize(
    ("query", "field"),
    [
        ("planned_cost=0&failure_cost=10", "planned_cost"),
        ("planned_cost=10&failure_cost=-1", "failure_cost"),
        ("planned_cost=ten&failure_cost=10", "planned_cost"),
        ("planned_cost=1&failure_cost=10&visit_every_days=0", "visit_every_days"),
        ("planned_cost=1&failure_cost=10&part=SCREW-1", "part"),
    ],
)
def test_what_cannot_be_weighed_is_refused_on_its_field(manager: Client, query: str, field: str) -> None:
    SmallFleet()
    screws = Component.objects.create(code="SCREW", clock="days")
    Part.objects.create(code="SCREW-1", component=screws)
    answer = manager.get(f"{PAGE}?{query}")
    assert answer.status_code == 422
    assert list(answer.context["form"].errors) == [field]


def test_an_unknown_component_is_not_there(manager: Client) -> None:
    assert manager.get("/forecast/planned-replacement/SAIL/").status_code == 404


# --- remembered ---


def remember(client: Client, **costs: Any) -> Any:
    return client.post(PAGE, {"planned_cost": "40", "failure_cost": "400", **costs})


def test_costs_are_remembered_with_their_history(manager: Client) -> None:
    SmallFleet()
    assert remember(manager, visit_every_days="14").status_code == 302
    stored = ReplacementCost.objects.get()
    assert (stored.planned_cost, stored.failure_cost, stored.visit_every_days) == (40, 400, 14)
    assert remember(manager, version="1", failure_cost="450").status_code == 302
    stored.refresh_from_db()
    assert (stored.failure_cost, stored.visit_every_days, stored.version) == (450, None, 2)
    assert [row.failure_cost for row in stored.history.order_by("history_id")] == [400, 450]
    assert stored.history.first().history_user.code == "INES"
    page = manager.get(PAGE)
    assert page.context["form"]["failure_cost"].value() == "450.00"
    assert "INES" in page.content.decode().upper()


def test_two_who_change_them_at_once_are_told_apart(manager: Client) -> None:
    SmallFleet()
    remember(manager)
    remember(manager, version="1", failure_cost="450")
    late = remember(manager, version="1", failure_cost="500")
    assert late.status_code == 422
    assert remember(manager, failure_cost="500").status_code == 422
    assert ReplacementCost.objects.get().failure_cost == 450


@pytest.mark.parametrize("costs", [{"planned_cost": ""}, {"failure_cost": "0"}, {"visit_every_days": "99999"}])
def test_half_costs_are_not_stored(manager: Client, costs: dict[str, str]) -> None:
    SmallFleet()
    assert remember(manager, **costs).status_code == 422
    assert not ReplacementCost.objects.exists()


def test_what_stands_in_the_address_wins_over_what_is_remembered(manager: Client) -> None:
    SmallFleet()
    remember(manager)
    form = manager.get(f"{PAGE}?failure_cost=999").context["form"]
    assert (form["planned_cost"].value(), form["failure_cost"].value()) == ("40.00", "999")


def test_only_the_office_sees_costs_and_a_planner_counts_own_sites(client: Client) -> None:
    lived_fleet(12)
    site = Site.objects.get(code="LOCK")
    for nobody in (make_crew(site), make_bench()):
        client.force_login(nobody)
        assert client.get(PAGE).status_code == 403
        assert remember(client).status_code == 403
    client.force_login(make_planner(sites=[site]))
    found = client.get(f"{PAGE}?planned_cost=40&failure_cost=400&as=json").json()
    assert found["sites"] == [site.code]
    assert found["positions"] == 6
