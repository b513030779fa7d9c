"""The pure clock functions on hand-worked modules. Day 0 of each story is ordinal 1000; all values worked by hand."""

from __future__ import annotations

from typing import Any

import pytest

from fleet.clock_counts import Face, accumulate
from fleet.clocks import FAR_DAY, Knot, ModuleRecord, Span, SpanClock, Stay, clocks_of, site_on

RIVER, DEPOT, ESTUARY = 1, 2, 3


def record(**fields: Any) -> ModuleRecord:
    return ModuleRecord(module=7, **fields)


def knot_at(made: list[Knot], day: float) -> Knot:
    return next(knot for knot in made if knot.day == day)


def only_span(story: ModuleRecord) -> SpanClock:
    (span,) = clocks_of(story).spans
    return span


def test_a_module_without_placements_is_always_in_service() -> None:
    span = only_span(record(spans=[Span(1, 1000, end_day=1061, removed_day=1061, failed=True)]))
    assert (span.days_at_fit, span.days_at_end) == (0.0, 61.0)
    assert span.strokes_at_end is None
    assert span.site_id is None


def test_depot_and_the_time_between_stays_do_not_age_a_part() -> None:
    stays = [Stay(1000, 1010, RIVER), Stay(1010, 1020, DEPOT, "depot"), Stay(1025, None, ESTUARY)]
    span = only_span(record(stays=stays, spans=[Span(1, 1000, end_day=1030, removed_day=1030)]))
    assert span.days_at_end == 15.0  # ten at the river, five at the estuary
    assert span.site_id == ESTUARY


def test_time_before_the_first_placement_does_not_age_a_part() -> None:
    span = only_span(record(stays=[Stay(1005, None, RIVER)], spans=[Span(1, 1000, end_day=1010, removed_day=1010)]))
    assert span.days_at_end - span.days_at_fit == 5.0


def test_a_stop_takes_its_time_away_and_overlapping_stops_only_once() -> None:
    stops = [(1002.5, 1004.0), (1003.0, 1005.0), (1008.25, None)]
    story = record(stays=[Stay(1000, None, RIVER)], stops=stops, spans=[Span(1, 1000)])
    made = clocks_of(story).knots
    assert knot_at(made, 1005.0).days == 2.5
    assert knot_at(made, 1008.25).days == 5.75
    assert made[-1].day == FAR_DAY
    assert made[-1].days == 5.75  # still stopped


def test_a_scrapped_module_no_longer_runs() -> None:
    made = clocks_of(record(stays=[Stay(1000, None, RIVER)], scrapped_day=1040)).knots
    assert made[-1].days == 40.0


def test_strokes_are_linear_over_service_time_and_flagged_beyond_the_last_reading() -> None:
    story = record(
        stays=[Stay(1000, None, RIVER)],
        stops=[(1010.0, 1020.0)],
        strokes=[Face(1000.0, 0.0), Face(1030.0, 2000.0)],
        spans=[
            Span(1, 1000, end_day=1025, removed_day=1025, ended_at=1025.0),
            Span(2, 1000, end_day=1040, removed_day=1040, ended_at=1040.0),
        ],
    )
    within, beyond = clocks_of(story).spans
    assert (within.strokes_at_end, within.strokes_measured) == (1500.0, True)  # 15 of 20 service days
    assert (beyond.strokes_at_end, beyond.strokes_measured) == (3000.0, False)  # 100 a day goes on


def test_a_count_written_down_at_the_fitting_beats_the_line_between_readings() -> None:
    story = record(
        strokes=[Face(1000.0, 0.0), Face(1100.0, 10_000.0)],
        spans=[Span(1, 1010, 1050, 1050, strokes_at_fit=900, strokes_at_removal=5_600)],
    )
    span = only_span(story)
    assert (span.strokes_at_fit, span.strokes_at_end, span.strokes_measured) == (900, 5_600, True)


def test_without_readings_the_duty_of_each_site_counts_and_is_not_called_measured() -> None:
    stays = [Stay(1000, 1010, RIVER, strokes_per_day=100.0), Stay(1010, None, ESTUARY, strokes_per_day=300.0)]
    story = record(stays=stays, spans=[Span(1, 1000, end_day=1020, removed_day=1020, ended_at=1020.0)])
    span = only_span(story)
    assert (span.strokes_at_end, span.strokes_measured) == (4000.0, False)
    assert span.hours_at_end is None


@pytest.mark.parametrize(
    ("faces", "totals"),
    [
        ([Face(1, 50_000), Face(2, 51_877)], [50_000, 51_877]),
        ([Face(1, 51_877, "A"), Face(2, 120, "B"), Face(3, 1_120, "B")], [51_877, 51_877, 52_877]),
        ([Face(1, 99_950, "A"), Face(2, 30, "A", "rolled over")], [99_950, 100_030]),
        ([Face(1, 100_000), Face(2, 5, "", "rolled over")], [100_000, 1_000_005]),
        ([Face(1, 1_200.5), Face(2, 1_204.0, "", "rolled over")], [1_200.5, 1_204.0]),  # only the strokes rolled over
        ([Face(1, 700), Face(2, 40, "", "reset"), Face(3, 90)], [700, 740, 790]),
        ([Face(1, 700), Face(2, 900, "A"), Face(3, 950, "A")], [700, 700, 750]),  # named: another counter
        ([Face(1, 700, "A"), Face(2, 800), Face(3, 900, "A")], [700, 800, 900]),  # not named: the same counter
        ([Face(1, 700), Face(2, 650)], [700, 700]),  # never falls
        ([Face(1, 500, "A"), Face(2, 0, "B"), Face(2, 700, "A"), Face(3, 50, "B")], [500, 700, 700, 750]),
    ],
)
def test_faces_become_accumulated_counts(faces: list[Face], totals: list[float]) -> None:
    assert [anchor.total for anchor in accumulate(faces)] == totals


def test_only_a_reading_that_advanced_shows_the_module_working() -> None:
    story = record(strokes=[Face(1000.5, 100.0), Face(1010.5, 100.0), Face(1020.5, 350.0)])
    seen = {knot.day for knot in clocks_of(story).knots if knot.seen_working}
    assert seen == {1020.5}


def test_the_last_look_before_the_failure_is_when_it_was_last_good() -> None:
    story = record(
        looks=[1000.4, 1020.4, 1040.4],
        spans=[Span(1, 1000, 1040, 1040, failed=True, fitted_at=1000.4, ended_at=1040.4)],
    )
    span = only_span(story)
    assert (span.last_good_day, span.days_at_good, span.last_good_entered) == (1020.4, pytest.approx(20.4), False)


def test_a_last_good_day_that_was_entered_stands() -> None:
    spans = [Span(1, 1000, 1040, 1040, failed=True, last_good_day=1033)]
    span = only_span(record(looks=[1000.4, 1020.4, 1040.4], spans=spans))
    assert (span.last_good_day, span.days_at_good, span.last_good_entered) == (1033.0, 33.0, True)


@pytest.mark.parametrize(
    ("module_day", "stays", "expected"),
    [
        (None, [Stay(1000, None, RIVER, records_day=1050)], 1050),
        (1070, [Stay(1000, None, RIVER, records_day=1050)], 1070),  # the module's own day stands above
        (None, [Stay(1000, None, RIVER, records_day=1005)], None),  # before the part came in
        (None, [Stay(1000, 1030, RIVER, records_day=1050), Stay(1030, None, ESTUARY)], 1030),  # moved to a better site
        (None, [Stay(1000, None, RIVER)], None),
        (1050, [], 1050),
    ],
)
def test_records_from_is_the_end_of_the_time_nobody_wrote_down(
    module_day: int | None, stays: list[Stay], expected: int | None
) -> None:
    story = record(stays=stays, records_day=module_day, spans=[Span(1, 1010)])
    assert only_span(story).records_day == expected


def test_on_the_day_of_a_move_a_record_belongs_to_the_field_then_to_the_stay_that_ends() -> None:
    stays = [Stay(1000, 1010, RIVER), Stay(1010, 1020, DEPOT, "depot"), Stay(1020, 1030, ESTUARY)]
    both = [*stays, Stay(1030, None, RIVER)]
    assert [site_on(both, day) for day in (1000, 1010, 1015, 1020, 1030, 1031)] == [
        RIVER, RIVER, DEPOT, ESTUARY, ESTUARY, RIVER,
    ]  # fmt: skip
    assert site_on(stays, 990) is None
