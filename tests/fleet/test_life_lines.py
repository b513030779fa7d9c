"""The drawing itself: what stands where, told by colour, dash and shape; nothing that the policy refuses."""

from __future__ import annotations

import datetime as dt
import re
import xml.etree.ElementTree as ElementTree
from dataclasses import replace
from itertools import pairwise

import pytest

from fleet.life_lines import (
    CUT,
    FAILED,
    NARROW,
    RUNNING,
    WIDE,
    WITHDRAWN,
    Bar,
    LifeHistory,
    Shade,
    Strip,
    life_lines,
    thinned,
    ticks,
)
from fleet.part_styles import PART_STYLES


def day(text: str) -> float:
    return dt.date.fromisoformat(text).toordinal()


def bar(start: str, end: str, ending: str = FAILED, **more) -> Bar:
    fields = {"rank": 0, "code": "N1", "words": f"N1 {start}"}
    return Bar(start=day(start), end=day(end), ending=ending, **{**fields, **more})


HISTORY = LifeHistory(
    tag="KM-0147",
    first=day("2024-01-01"),
    last=day("2026-01-01"),
    strips=[
        Strip(
            "drive nut",
            [
                bar("2024-01-01", "2024-07-01", FAILED),
                bar("2024-07-01", "2025-01-01", WITHDRAWN, rank=1, code="N2"),
                bar("2025-01-01", "2026-01-01", RUNNING, rank=2, code="N3"),
            ],
        ),
        Strip("lead screw", [bar("2024-01-01", "2026-01-01", RUNNING, code="S1", open_start=True)]),
    ],
    shades=[
        Shade("stop", day("2024-03-01"), day("2024-03-05"), "stood still"),
        Shade("away", day("2025-03-01"), day("2025-04-01"), "at the depot"),
    ],
    visits=[(day("2024-07-01") + 0.5, "visit"), (day("2025-01-01") + 0.5, "visit")],
    counter=[[(day("2024-01-01"), 0.0), (day("2025-01-01"), 400_000.0), (day("2026-01-01"), 1_102_700.0)]],
)


def drawn(history: LifeHistory = HISTORY, layout=WIDE) -> ElementTree.Element:
    return ElementTree.fromstring(str(life_lines(history, layout)))


def of_class(svg: ElementTree.Element, css: str) -> list[ElementTree.Element]:
    return [element for element in svg.iter() if css in (element.get("class") or "").split()]


@pytest.mark.parametrize("layout", [WIDE, NARROW])
def test_each_ending_has_its_own_mark(layout):
    svg = drawn(layout=layout)
    assert len(of_class(svg, "fail")) == 1
    assert len(of_class(svg, "wd")) == 1
    assert len(of_class(svg, "run")) == 2
    assert len(of_class(svg, "open-start")) == 1
    assert len(of_class(svg, "stop")) == 1
    assert len(of_class(svg, "away")) == 1
    assert len(of_class(svg, "visit")) == 2
    assert [element.text for element in of_class(svg, "pos")] == ["drive nut", "lead screw"]
    assert {element.text for element in of_class(svg, "code")} == {"N3", "S1", "1.10 M"}


def test_a_part_has_its_colour_its_dash_and_its_marker_shape():
    svg = drawn()
    for rank in (0, 1, 2):
        style = PART_STYLES[rank]
        assert [each for each in of_class(svg, "fit") if style.css in each.get("class").split()]
        assert [each for each in of_class(svg, "mark") if each.get("d") == style.path]
    assert len({PART_STYLES[rank].path for rank in range(8)}) == 8


@pytest.mark.parametrize("layout", [WIDE, NARROW])
def test_time_runs_to_scale_and_strips_share_it(layout):
    svg = drawn(layout=layout)
    cross = float(re.search(r"translate\(([\d.]+)", of_class(svg, "fail")[0].get("transform")).group(1))
    ring = float(of_class(svg, "wd")[0].get("cx"))
    rail = of_class(svg, "rail")[0]
    left, right = float(rail.get("x1")), float(rail.get("x2"))
    days = HISTORY.last - HISTORY.first
    assert cross == pytest.approx(left + (day("2024-07-01") - HISTORY.first) / days * (right - left), abs=0.06)
    assert ring == pytest.approx(left + (day("2025-01-01") - HISTORY.first) / days * (right - left), abs=0.06)
    year = next(each for each in of_class(svg, "yr") if abs(float(each.get("x1")) - ring) < 0.1)
    assert year is not None


def test_the_counter_rises_from_its_foot_to_its_highest_value():
    points = of_class(drawn(), "counter")[0].get("points").split()
    heights = [float(point.split(",")[1]) for point in points]
    assert heights == sorted(heights, reverse=True)
    share = (heights[0] - heights[1]) / (heights[0] - heights[2])
    assert share == pytest.approx(400_000 / 1_102_700, abs=0.01)


def test_a_failure_before_the_removal_stands_on_its_own_day():
    failed = bar("2024-01-01", "2024-07-01", failed_at=day("2024-06-01"))
    svg = drawn(replace(HISTORY, strips=[Strip("nut", [failed])]))
    cross = float(re.search(r"translate\(([\d.]+)", of_class(svg, "fail")[0].get("transform")).group(1))
    thin = of_class(svg, "thin")[0]
    assert float(thin.get("x1")) == pytest.approx(cross, abs=0.06)
    assert float(thin.get("x2")) > cross


def test_a_stay_that_goes_on_out_of_sight_has_no_mark_at_its_end():
    svg = drawn(replace(HISTORY, strips=[Strip("nut", [bar("2024-01-01", "2025-01-01", CUT)])]))
    assert not [*of_class(svg, "fail"), *of_class(svg, "wd"), *of_class(svg, "run")]


@pytest.mark.parametrize("nasty", ['<script>alert("x")</script>', "a & b", "\"'><b>", "]]>"])
def test_what_people_wrote_is_text_and_nothing_else(nasty):
    named = replace(
        HISTORY,
        tag=nasty,
        strips=[Strip(nasty, [bar("2024-01-01", "2026-01-01", RUNNING, code=nasty, words=nasty)])],
        shades=[Shade("stop", day("2024-03-01"), day("2024-03-05"), nasty)],
        visits=[(day("2024-07-01"), nasty)],
        counter_words=nasty,
    )
    svg = drawn(named)
    assert {element.tag for element in svg.iter()} <= {
        "svg",
        "rect",
        "title",
        "line",
        "text",
        "g",
        "path",
        "circle",
        "polyline",
    }
    assert nasty in [element.text for element in of_class(svg, "pos")]


@pytest.mark.parametrize("layout", [WIDE, NARROW])
def test_no_style_and_no_colour_of_its_own(layout):
    text = str(life_lines(HISTORY, layout))
    assert "style=" not in text
    assert not re.search(r'(fill|stroke)="', text)
    assert not re.search(r"#[0-9a-f]{3,6}\b", text)


@pytest.mark.parametrize("layout", [WIDE, NARROW])
@pytest.mark.parametrize(
    ("first", "last"),
    [
        ("2026-01-01", "2026-01-15"),
        ("2026-01-30", "2026-05-02"),
        ("2019-06-01", "2026-01-01"),
        ("1990-01-01", "2026-01-01"),
    ],
)
def test_labels_of_the_axis_never_run_into_each_other(layout, first, last):
    svg = drawn(replace(HISTORY, first=day(first), last=day(last), strips=[Strip("nut", [])]), layout)
    foot = max(float(each.get("y")) for each in of_class(svg, "ax"))
    places = sorted(float(each.get("x")) for each in of_class(svg, "ax") if float(each.get("y")) == foot)
    assert places
    assert all(later - earlier >= 26 for earlier, later in pairwise(places))
    assert places[-1] <= layout.width - 26


def test_everything_lies_within_the_drawing():
    for layout in (WIDE, NARROW):
        svg = drawn(layout=layout)
        _, _, width, height = (float(number) for number in svg.get("viewBox").split())
        crosses = {line for cross in of_class(svg, "fail") for line in cross}  # drawn about their own middle
        for element in set(svg.iter()) - crosses:
            for name in ("x1", "x2", "cx", "x"):
                assert 0 <= float(element.get(name, 0)) <= width
            for name in ("y1", "y2", "cy", "y"):
                assert 0 <= float(element.get(name, 0)) <= height


def test_cutting_the_past_off_opens_what_began_before():
    later = HISTORY.since(day("2024-10-01"))
    assert [each.start for each in later.strips[0].bars] == [day("2024-10-01"), day("2025-01-01")]
    assert [each.open_start for each in later.strips[0].bars] == [True, False]
    assert [shade.kind for shade in later.shades] == ["away"]
    assert len(later.visits) == 1
    assert HISTORY.since(HISTORY.first) is HISTORY


def test_a_history_without_anything_still_draws():
    empty = LifeHistory("KM-1", day("2026-01-01"), day("2026-01-01"), [])
    assert drawn(empty).get("role") == "img"
    assert drawn(replace(empty, strips=[Strip("nut", [])], counter=[[]]), NARROW) is not None


def test_quarters_and_years_are_the_firsts_of_their_months():
    found = [(tick.kind, tick.words) for tick in ticks(day("2024-11-15"), day("2025-08-01")) if tick.kind != "mo"]
    assert found == [("yr", "2025"), ("qt", "Q2"), ("qt", "Q3")]


def test_thinning_keeps_the_ends_and_the_order():
    points = [(float(index), float(index * index)) for index in range(5_000)]
    kept = list(thinned(points))
    assert len(kept) < 600
    assert (kept[0], kept[-1]) == (points[0], points[-1])
    assert kept == sorted(kept)
