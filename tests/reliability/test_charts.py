"""Figures of the Life screen: what Plotly takes, what is drawn, and that it is the document's own numbers."""

from __future__ import annotations

import math
from typing import Any

import pytest

from reliability.charts.groups import MOST_GROUPS, drawn_groups, level_at, rank_of, steps
from reliability.charts.survival import at_risk_table, compared_at, curve_table, longest_age, survival_figure
from reliability.charts.weibull_plot import line_table, plotted_points, weibull_figure
from reliability.risk_ages import round_ages
from tests.reliability.told_lives import document, failed, some, withdrawn
from tests.stats.reference import aml_maintained, bearing_cages, channing, shock_absorbers, turbine_wheels

DOCUMENTS = {
    "two parts": lambda: document({"P1": some(60, 2.0, 100), "P2": some(40, 3.0, 150)}),
    "many lots": lambda: document({f"L{n}": some(12, 2.0, 100 + 10 * n, seed=n) for n in range(11)}, by="lot"),
    "several sites": lambda: document({"P1": some(120, 2.0, 100, sites=4)}),
    "all together": lambda: document({"": shock_absorbers()}, by=None),
    "few failures": lambda: document({"P1": bearing_cages()}),
    "no failure": lambda: document({"P1": withdrawn(10, 20, 30)}),
    "one age": lambda: document({"P1": failed(5, 5, 5)}),
    "looked at once": lambda: document({"P1": turbine_wheels()}),
    "late entries": lambda: document({"P1": channing("1")}),
}


def with_colours(value: Any) -> Any:
    """Plotly's own check knows no style sheet: any colour stands for the names of ours."""
    if isinstance(value, str) and value.startswith("var(--"):
        return "#123456"
    if isinstance(value, list):
        return [with_colours(each) for each in value]
    if isinstance(value, dict):
        return {key: with_colours(each) for key, each in value.items()}
    return value


@pytest.mark.parametrize("name", DOCUMENTS)
def test_plotly_takes_every_figure(name: str) -> None:
    from plotly.graph_objects import Figure

    told = DOCUMENTS[name]()
    for figure in (survival_figure(told, {}), weibull_figure(told, {})):
        Figure(with_colours(figure))
        numbers = [value for trace in figure["data"] for axis in ("x", "y") for value in trace[axis]]
        assert all(math.isfinite(value) for value in numbers)


def test_a_curve_begins_at_all_and_ends_where_nobody_was_seen_longer() -> None:
    """Leukaemia remission data (Miller 1981), maintained group; survival recomputed by hand: 10/11, 9/11 …"""
    (group,) = document({"P1": aml_maintained()})["groups"]
    ages, heights = steps(group, "survival")
    assert (ages[0], heights["survival"][0]) == (0, 1.0)
    assert heights["survival"][1:3] == pytest.approx([10 / 11, 9 / 11], abs=1e-5)
    assert ages[-1] == 161
    assert heights["survival"][-1] == heights["survival"][-2]


def test_what_is_left_out_of_a_drawing_cannot_be_seen() -> None:
    (group,) = document({"P1": some(5000, 2.0, 1000)})["groups"]
    ages, heights = steps(group, "survival")
    assert len(ages) < 900 < len(group["curve"]["age"])
    for age in range(0, int(group["curve"]["last_age"]), 7):
        drawn = heights["survival"][max(place for place, knot in enumerate(ages) if knot <= age)]
        assert abs(drawn - level_at(group, "survival", age)) <= 0.002  # a third of a dot of the drawing


def test_heights_of_a_curve_at_an_age() -> None:
    """Three failures at 10, 20 and 30; beside them one seen to 40."""
    told = document({"P1": failed(10, 20, 30), "P2": withdrawn(40)})
    first = told["groups"][0]
    assert [level_at(first, "survival", age) for age in (0, 9, 10, 29, 30)] == pytest.approx([1, 1, 2 / 3, 1 / 3, 0])
    assert level_at(first, "survival", 31) is None
    assert level_at(first, "lower", 9) is None
    assert compared_at(told, 35) == [{"group": "P2", "survival": 1.0, "lower": None, "upper": None}]


def test_the_table_under_the_curves_counts_who_was_under_observation() -> None:
    told = document({"P1": failed(10, 20, 30), "P2": withdrawn(40, 50)})
    table = at_risk_table(told)
    assert [column["label"] for column in table["columns"]][1:] == ["0", "10", "20", "30", "40", "50"]
    assert table["rows"] == [["P1", 3, 2, 1, 0, 0, 0], ["P2", 2, 2, 2, 2, 1, 0]]


def test_late_entries_are_not_under_observation_before_they_enter() -> None:
    told = document({"P1": channing("1")}, clock="days")
    assert told["at_risk"]["counts"]["P1"][0] == 0
    assert max(told["at_risk"]["counts"]["P1"]) > 10


@pytest.mark.parametrize(
    ("longest", "ages"),
    [
        (0, [0]),
        (337, [0, 100, 200, 300]),
        (1050, [0, 250, 500, 750, 1000]),
        (188_015, [0, 50_000, 100_000, 150_000]),
        (0.9, [0, 0.2, 0.4, 0.6, 0.8]),
    ],
)
def test_round_ages(longest: float, ages: list[float]) -> None:
    assert round_ages(longest) == pytest.approx(ages)


def test_points_of_the_plot_lie_at_half_their_step() -> None:
    """Failures of 3 in 4: S = 3/4, 1/2, 1/4; halves 7/8, 5/8, 3/8 (Meeker & Escobar 1998, section 6.4)."""
    (group,) = document({"P1": withdrawn(40)})["groups"]
    group["curve"] |= {"age": [10, 20, 30], "survival": [0.75, 0.5, 0.25]}
    xs, ys = plotted_points(group)
    assert xs == [10, 20, 30]
    assert [math.exp(-math.exp(y)) for y in ys] == pytest.approx([7 / 8, 5 / 8, 3 / 8], abs=1e-4)


def test_the_line_of_the_plot_is_straight_with_the_fitted_slope() -> None:
    told = document({"P1": some(200, 2.5, 100)})
    (group,) = told["groups"]
    line = next(trace for trace in weibull_figure(told, {})["data"] if trace.get("name") == "P1, Weibull")
    slopes = [
        (line["y"][place + 1] - line["y"][place]) / math.log(line["x"][place + 1] / line["x"][place])
        for place in range(len(line["x"]) - 1)
    ]
    assert slopes == pytest.approx([group["weibull"]["shape"]["estimate"]] * len(slopes), rel=0.02)


def test_points_with_late_entries_hang_on_the_line() -> None:
    """The curve is given survival to its start: the points are taken down to where the line is there."""
    told = document({"P1": channing("1")})
    (group,) = told["groups"]
    _, ys = plotted_points(group)
    line = group["fitted"]
    start = group["curve"]["given_survival_to"]
    at_start = min(zip(line["age"], line["survival"], strict=True), key=lambda pair: abs(pair[0] - start))[1]
    assert start > 0
    assert math.exp(-math.exp(ys[0])) < at_start


def test_a_line_carried_on_beyond_the_oldest_part_is_drawn_apart() -> None:
    told = document({"P1": bearing_cages()})
    (group,) = told["groups"]
    traces = [trace for trace in survival_figure(told, {})["data"] if trace.get("name") == "P1, Weibull"]
    seen, beyond = traces
    assert max(seen["x"]) <= group["curve"]["last_age"] < max(beyond["x"])
    assert beyond["line"]["dash"] != seen["line"].get("dash")
    assert longest_age([group]) > group["curve"]["last_age"]


def test_a_typical_site_stands_in_the_plot_with_its_own_interval() -> None:
    told = document({"P1": some(300, 2.0, 100, sites=5)})
    (group,) = told["groups"]
    bars = next(trace for trace in weibull_figure(told, {})["data"] if trace.get("name") == "P1, typical site")
    assert bars["x"] == pytest.approx([group["b10"]["estimate"], group["median"]["estimate"]], abs=0.01)
    right = [x + more for x, more in zip(bars["x"], bars["error_x"]["array"], strict=True)]
    assert right == pytest.approx([group["b10"]["upper"], group["median"]["upper"]], abs=0.02)


def test_tables_hold_what_the_figures_show() -> None:
    told = document({"P1": some(200, 2.0, 100), "P2": some(200, 2.0, 200)})
    curves, lines = curve_table(told), line_table(told)
    age = float(curves["rows"][0][0]["text"])
    assert curves["rows"][0][1]["estimate"]["estimate"] == level_at(told["groups"][0], "survival", age)
    first, second = (cell["estimate"]["estimate"] for cell in lines["rows"][0][1:])
    assert first > second  # the shorter life has failed more by then
    assert curves["rows"][-1][1] == {"text": "not seen"}


def test_a_part_looks_the_same_whatever_else_is_drawn() -> None:
    both = document({"P1": some(40, 2.0, 100), "P2": some(40, 2.0, 150)})
    alone = document({"P2": some(40, 2.0, 150)})
    ranks = {"P1": 0, "P2": 1}
    assert rank_of(both, both["groups"][1], ranks) == rank_of(alone, alone["groups"][0], ranks) == 1
    colours = {
        trace["line"]["color"]
        for told in (both, alone)
        for trace in survival_figure(told, ranks)["data"]
        if trace.get("name") == "P2" and "color" in trace["line"]
    }
    assert colours == {"var(--p2)"}


def test_no_more_groups_are_drawn_than_can_be_told_apart() -> None:
    told = DOCUMENTS["many lots"]()
    drawn = drawn_groups(told)
    assert len(drawn) == MOST_GROUPS
    names = [group["group"] for group in told["groups"]]
    assert [group["group"] for group in drawn] == sorted((g["group"] for g in drawn), key=names.index)
    assert min(group["lives"] for group in drawn) >= max(g["lives"] for g in told["groups"] if g not in drawn)
