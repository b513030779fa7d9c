"""The page of past forecasts: sentences, picture, table, files; beginning, following and stopping it; refusals."""

from __future__ import annotations

from typing import Any

import pytest
from django.test import Client

from fleet.models import Component, Work
from fleet.work import run_here
from reliability.charts.backtest import backtest_figure, quarter_name
from reliability.forecasts import backtest_words as words
from reliability.forecasts.backtest import KIND, document_of, keep, latest
from reliability.forecasts.backtest_quarter import NO_LIFE, kept_part, scored
from reliability.kept import key_of
from reliability.stats.hits import poisson_count
from tests.factories import make_component, make_crew, make_manager, make_person, make_planner, make_site

pytestmark = pytest.mark.django_db
BEGINS = [
    "2024-10-07",
    "2025-01-06",
    "2025-04-07",
    "2025-07-07",
    "2025-10-06",
    "2026-01-05",
    "2026-04-06",
    "2026-07-06",
]


def quarter(
    begin: str, actual: int, mean: float = 20.0, rate: float = 30.0, last: float | None = 20.0
) -> dict[str, Any]:
    """A judged quarter: our forecast and both rivals Poisson. At a mean of 20 the 80 % band (14 to 26) promises 86 %:
    of eight such bands 6 to 8 hits are ordinary.
    """
    return {
        "from": begin,
        "until": begin,
        "as_of": begin,
        "positions": 50,
        "in_modules_that_came_later": 0,
        "measures": {
            "failures": measured(actual, mean, rate, last),
            "parts_used": measured(2 * actual, 2 * mean, 2 * rate, last),
        },
    }


def measured(actual: int, mean: float, rate: float, last: float | None, known: int = 9) -> dict[str, Any]:
    ours = poisson_count(mean)
    rivals = {"constant_rate": poisson_count(rate), "last_quarter": None if last is None else poisson_count(last)}
    return {
        **scored(ours, actual),
        "actual": actual,
        "median": ours.quantile(0.5),
        "failures_known": known,
        "pit": 0.5,
        "pmf": kept_part(ours),
        "rivals": {key: None if each is None else scored(each, actual) for key, each in rivals.items()},
    }


def keep_document(component: Component, quarters: list[dict[str, Any]]) -> dict[str, Any]:
    document = document_of(component, 8, quarters)
    keep(KIND, key_of({"component": component.code}), 0, document)
    return document


@pytest.fixture
def nut() -> Component:
    return make_component(code="NUT", name="drive nut")


@pytest.fixture
def manager(client: Client) -> Client:
    client.force_login(make_manager())
    return client


def good(nut: Component) -> dict[str, Any]:
    """Seven of eight within 14 to 26."""
    return keep_document(
        nut, [quarter(begin, actual) for begin, actual in zip(BEGINS, [20, 18, 23, 25, 15, 21, 27, 19], strict=True)]
    )


def text_of(page: Any) -> str:
    return page.content.decode().replace("\u00a0", " ").replace("&nbsp;", " ")


def test_the_page_says_hits_bias_and_rivals_and_draws_them(manager: Client, nut: Component) -> None:
    good(nut)
    page = manager.get("/forecast/backtest/")
    text = text_of(page)
    assert "In the last 8 quarters 7 actual figures lay within the 80 % band; 6 to 8 is ordinary." in text
    assert "168 failures happened where 160 were expected in all, 5 % more; 136 to 185 would be ordinary" in text
    assert "Constant rate: missed by" in text
    assert "the forecast was nearer in 6 of 8 quarters. The forecast was better" in text
    assert "They do not certify that any part is safe" in text
    assert "Oct–Dec 2024" in text
    assert page.context["chart"]["figure"]["data"][-1]["y"] == [20, 18, 23, 25, 15, 21, 27, 19]


def test_parts_used_are_judged_alike(manager: Client, nut: Component) -> None:
    good(nut)
    page = manager.get("/forecast/backtest/?component=NUT&measure=parts_used")
    assert "336 parts were used where 320 were expected in all" in text_of(page)
    assert page.context["chart"]["figure"]["layout"]["yaxis"]["title"] == "Parts used in 13 weeks"
    file = manager.get("/forecast/backtest/?component=NUT&measure=parts_used&as=csv")
    assert b"".join(file.streaming_content).decode("utf-8-sig").splitlines()[1].split(",")[4] == "40"
    assert manager.get("/forecast/backtest/?measure=hats").status_code == 422


def test_one_line_for_the_forecast_screen(nut: Component) -> None:
    line = words.line(good(nut))
    assert (
        line["sentence"] == "In the last 8 quarters 7 actual figures lay within the 80\u00a0% band; 6 to 8 is ordinary."
    )
    assert line["note"] == ""


def test_too_few_hits_say_that_the_bands_were_too_narrow(nut: Component) -> None:
    document = keep_document(nut, [quarter(begin, 40) for begin in BEGINS])
    line = words.line(document)
    assert "none of the actual figures lay within" in line["sentence"]
    assert "less sure than it says" in line["note"]
    assert words.bias(document).endswith("The forecasts ran too low.")
    low = keep_document(nut, [quarter(begin, 3) for begin in BEGINS])
    assert words.bias(low).endswith("The forecasts ran too high.")


def test_without_a_failure_known_the_middle_stands_for_the_mean(manager: Client, nut: Component) -> None:
    quarters = [quarter(begin, 0) for begin in BEGINS]
    for each in quarters:
        each["measures"]["failures"] = measured(0, 0.6, 0.0, 0.0, known=0)
    document = keep_document(nut, quarters)
    assert words.bias(document).startswith("0 failures happened where 5 were expected in all;")
    page = manager.get("/forecast/backtest/")
    assert "none failed yet" in text_of(page)
    assert page.context["chart"]["figure"]["data"][-2]["y"] == [0] * 8


def test_a_young_book_says_how_many_quarters_there_are(manager: Client, nut: Component) -> None:
    missing = [{"from": begin, "passed_over": NO_LIFE} for begin in BEGINS[:6]]
    document = keep_document(nut, [*missing, quarter(BEGINS[6], 20), quarter(BEGINS[7], 22, last=None)])
    text = text_of(manager.get("/forecast/backtest/"))
    assert "In the last 2 quarters 2 actual figures lay within the 80 % band." in text
    assert "too few quarters to say whether the bands hold" in text
    assert "6 earlier quarters could not be judged: no life was on record then." in text
    assert "One quarter cannot tell which is better" in words.rivals(document)[1]
    keep_document(nut, [])
    assert "The records are too young" in text_of(manager.get("/forecast/backtest/"))
    keep_document(nut, missing)
    assert "too young" in text_of(manager.get("/forecast/backtest/"))


def test_one_quarter_is_told_as_one(nut: Component) -> None:
    line = words.line(document_of(nut, 1, [quarter(BEGINS[0], 20)]))
    assert line["sentence"] == "In the last quarter the actual figure lay within the 80\u00a0% band."


def test_the_quarters_are_files(manager: Client, nut: Component) -> None:
    good(nut)
    lines = (
        b"".join(manager.get("/forecast/backtest/?component=NUT&as=csv").streaming_content)
        .decode("utf-8-sig")
        .splitlines()
    )
    assert lines[0].startswith(
        "component,from,until,as_of,happened,expected,from_50,to_50,from_80,to_80,from_95,to_95,pit,crps"
    )
    assert len(lines) == 9
    assert lines[1].startswith("NUT,2024-10-07,")
    document = manager.get("/forecast/backtest/?component=NUT&as=json").json()
    assert document["measures"]["failures"]["hits"]["0.8"]["hits"] == 7


def test_it_is_begun_once_followed_and_stopped(manager: Client, nut: Component) -> None:
    assert "were not judged yet" in text_of(manager.get("/forecast/backtest/?component=NUT"))
    for _ in range(2):
        reply = manager.post("/forecast/backtest/?component=NUT", {"quarters": "4"})
        assert (reply.status_code, reply["Location"]) == (302, "/forecast/backtest/?component=NUT&measure=failures")
    work = Work.objects.get()
    assert (work.kind, work.arguments) == ("backtest", {"component": "NUT", "quarters": 4})
    text = text_of(manager.get("/forecast/backtest/?component=NUT"))
    assert "Stop it" in text
    assert 'hx-trigger="every 2s"' in text
    stop = manager.post("/forecast/backtest/?component=NUT&measure=failures&stop=1")
    assert stop["Location"] == "/forecast/backtest/?component=NUT&measure=failures"
    assert 'action="/forecast/backtest/?component=NUT&amp;measure=failures&amp;stop=1"' in text
    text = text_of(manager.get("/forecast/backtest/?component=NUT"))
    assert "came to no end. Stopped before it began." in text
    assert "Stop it" not in text
    manager.post("/forecast/backtest/?component=NUT", {"quarters": "4"})
    assert run_here(Work.objects.first()).state == "done"
    assert "The records are too young" in text_of(manager.get("/forecast/backtest/?component=NUT"))
    assert (latest(nut) or {})["asked"] == 4


@pytest.mark.parametrize("quarters", ["", "0", "41", "many"])
def test_wrong_numbers_of_quarters_are_refused_on_the_field(manager: Client, nut: Component, quarters: str) -> None:
    reply = manager.post("/forecast/backtest/?component=NUT", {"quarters": quarters})
    assert reply.status_code == 422
    assert "1 to 40" in reply.context["quarters_form"].errors["quarters"][0]
    assert not Work.objects.exists()


def test_an_unknown_component_is_refused(manager: Client, nut: Component) -> None:
    assert manager.get("/forecast/backtest/?component=SAIL").status_code == 422


def test_an_empty_book_says_what_to_do(manager: Client) -> None:
    assert "No component is in the catalogue yet" in text_of(manager.get("/forecast/backtest/"))


def test_who_sees_some_sites_gets_no_figures_of_others(client: Client, nut: Component) -> None:
    good(nut)
    client.force_login(make_person(role="planner", sites=[make_site()]))
    for query in ("", "?as=csv", "?as=json"):
        text = text_of(client.get(f"/forecast/backtest/{query}"))
        assert "you see some of its sites only" in text
        assert "168" not in text
    client.post("/forecast/backtest/?component=NUT", {"quarters": "4"})
    assert not Work.objects.exists()
    client.force_login(make_planner())
    assert "7 actual figures" in text_of(client.get("/forecast/backtest/"))
    client.force_login(make_crew())
    assert client.get("/forecast/backtest/").status_code == 403


def test_bands_are_drawn_as_columns_from_their_lower_ends(nut: Component) -> None:
    figure = backtest_figure(good(nut)["measures"]["failures"], "failures")
    widest = figure["data"][0]
    low, high = widest["customdata"][0]
    assert (widest["base"][0], widest["y"][0]) == (low - 0.5, high - low + 1)
    assert [each["name"] for each in figure["data"]] == ["95 in 100", "80 in 100", "50 in 100", "expected", "happened"]
    assert quarter_name("2026-10-05") == "Oct–Dec 2026"
