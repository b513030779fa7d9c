"""Counters that turn over, are changed, are read late or wrongly."""

from __future__ import annotations

import uuid
from typing import Any

import pytest

from fleet.actions.entries import CounterEntry, PartChange
from fleet.actions.errors import BadValue, CounterWentBack, NotAllowed
from fleet.actions.record_reading import record_reading
from fleet.actions.record_visit import record_visit
from fleet.actions.strike_out import strike_out
from fleet.models import ClockPoint, Fitting, Person, Reading
from tests.factories import Carriage, at, make_position

pytestmark = pytest.mark.django_db


def read(weir: Carriage, day: str, strokes: int | None = None, **fields: Any) -> Reading:
    entry = {name: fields.pop(name) for name in ("hours", "counter", "restarts") if name in fields}
    return record_reading(
        by=weir.crew, module=weir.module, read_at=at(day), counter=CounterEntry(strokes=strokes, **entry), **fields
    )


def accumulated(weir: Carriage) -> list[float | None]:
    points = ClockPoint.objects.filter(module=weir.module, strokes_read=True).order_by("day")
    return [point.strokes for point in points]


def test_a_face_that_falls_is_asked_back_with_the_last_one(weir: Carriage) -> None:
    read(weir, "2024-03-03", 51_877)
    with pytest.raises(CounterWentBack, match="Was the counter changed") as refusal:
        read(weir, "2024-03-09", 48_210)
    assert (refusal.value.field, refusal.value.data["last"]) == ("strokes", 51_877)
    read(weir, "2024-03-09", 51_877)


def test_hours_have_a_face_of_their_own(weir: Carriage) -> None:
    read(weir, "2024-03-03", 100, hours=12.5)
    with pytest.raises(CounterWentBack, match="Hour meter") as refusal:
        read(weir, "2024-03-09", 200, hours=12.4)
    assert refusal.value.field == "hours"
    assert Reading.objects.count() == 1


def test_a_late_reading_fits_between_its_neighbours(weir: Carriage) -> None:
    read(weir, "2024-03-01", 100)
    read(weir, "2024-03-20", 200)
    with pytest.raises(CounterWentBack):
        read(weir, "2024-03-10", 99)
    with pytest.raises(BadValue, match=r"above the later reading 200 of 20.March 2024"):
        read(weir, "2024-03-10", 201)
    read(weir, "2024-03-10", 150)
    with pytest.raises(BadValue, match="above the later reading 150"):
        read(weir, "2024-03-09", 151)
    read(weir, "2024-02-01", 5)
    assert accumulated(weir) == [5, 100, 150, 200]


def test_a_new_counter_a_reset_and_a_roll_over_go_on_counting(weir: Carriage) -> None:
    read(weir, "2024-03-01", 9_990, counter="C-1")
    read(weir, "2024-03-02", 20, restarts="rolled over")
    read(weir, "2024-03-03", 4, counter="C-2")
    read(weir, "2024-03-04", 50)
    read(weir, "2024-03-05", 7, restarts="reset")
    assert accumulated(weir) == [9_990, 10_020, 10_020, 10_066, 10_073]
    assert [reading.counter for reading in Reading.objects.order_by("read_at")] == ["C-1", "C-1", "C-2", "C-2", "C-2"]


def test_a_late_reading_belongs_to_the_counter_of_its_day(weir: Carriage) -> None:
    read(weir, "2024-03-01", 900, counter="C-1")
    read(weir, "2024-03-20", 10, counter="C-2")
    with pytest.raises(CounterWentBack):
        read(weir, "2024-03-10", 5)
    with pytest.raises(BadValue, match="above the later reading"):
        read(weir, "2024-03-10", 11, counter="C-2")
    read(weir, "2024-03-10", 5, counter="C-2")
    read(weir, "2024-03-09", 950)
    assert accumulated(weir) == [900, 950, 950, 955]


def test_a_counter_between_two_readings_of_another_is_refused(weir: Carriage) -> None:
    read(weir, "2024-03-01", 900, counter="C-1")
    read(weir, "2024-03-20", 990, counter="C-1")
    with pytest.raises(BadValue, match="between two readings of C-1") as refusal:
        read(weir, "2024-03-10", 5, counter="C-2")
    assert refusal.value.field == "counter"


def test_at_a_change_both_counters_are_read_at_one_moment_in_any_order(weir: Carriage) -> None:
    read(weir, "2024-03-01", 900, counter="C-1")
    read(weir, "2024-03-10", 0, counter="C-2")
    read(weir, "2024-03-10", 990, counter="C-1")
    read(weir, "2024-03-11", 5)
    assert Reading.objects.order_by("-read_at").first().counter == "C-2"


@pytest.mark.parametrize(
    ("strokes", "hours", "said", "counted"),
    [
        (20, 14.0, {"restarts": "rolled over"}, (10_020, 14.0)),
        (20, 14.0, {"counter": "C-2"}, (9_990, 14.0)),
        (9_995, 0.5, {"restarts": "reset"}, (9_995, 13.0)),
        (20, 0.5, {"restarts": "reset"}, (10_010, 13.0)),
        (9_999, 14.0, {"counter": "C-2"}, (9_990, 14.0)),
        (9_999, 14.0, {"counter": "C-1"}, (9_999, 14.0)),
    ],
)
def test_of_counter_and_meter_only_the_one_that_fell_began_again(
    weir: Carriage, strokes: int, hours: float, said: dict[str, str], counted: tuple[float, float]
) -> None:
    read(weir, "2024-03-01", 9_990, hours=12.5, counter="C-1")
    first = read(weir, "2024-03-02", strokes, hours=hours, **said)
    assert first.strokes == strokes
    read(weir, "2024-03-03", strokes + 10, hours=hours + 1)
    last = ClockPoint.objects.filter(module=weir.module, measured=True).order_by("-day").first()
    assert (last.strokes, last.hours) == (counted[0] + 10, counted[1] + 1)


def test_the_first_hours_come_with_a_counter_that_rolled_over(weir: Carriage) -> None:
    read(weir, "2024-03-01", 9_990)
    read(weir, "2024-03-02", 20, hours=7.0, restarts="rolled over")
    assert accumulated(weir) == [9_990, 10_020]


def test_a_visit_measures_both_where_only_the_counter_is_new(weir: Carriage) -> None:
    read(weir, "2024-03-01", 9_990, hours=12.5, counter="C-1")
    visit = record_visit(
        by=weir.crew,
        module=weir.module,
        happened_at=at("2024-03-02"),
        counter=CounterEntry(strokes=5, hours=13.5, counter="C-2"),
        changes=[PartChange(position=weir.nut, part=weir.n1)],
    )
    fitting = Fitting.objects.get()
    assert (fitting.strokes_at_fit, fitting.hours_at_fit) == (9_990, 13.5)
    screw = weir.fit(weir.s1, "2024-03-02", visit=visit)
    assert (screw.strokes_at_fit, screw.hours_at_fit) == (9_990, 13.5)


def test_a_new_counter_does_not_roll_over(weir: Carriage) -> None:
    read(weir, "2024-03-01", 900, counter="C-1")
    with pytest.raises(BadValue, match="has not rolled over"):
        read(weir, "2024-03-02", 5, counter="C-2", restarts="rolled over")


def test_the_same_key_reads_once(weir: Carriage) -> None:
    key = uuid.uuid4()
    assert read(weir, "2024-03-01", 9, entry_key=key) == read(weir, "2024-03-01", 9, entry_key=key)
    with pytest.raises(BadValue, match="used for another entry"):
        read(weir, "2024-03-01", 10, entry_key=key)
    assert Reading.objects.count() == 1


def test_play_is_measured_at_a_position_of_the_module(weir: Carriage) -> None:
    def measure(**fields: Any) -> Reading:
        return record_reading(by=weir.crew, module=weir.module, read_at=at("2024-03-01"), **fields)

    assert measure(position=weir.nut, play_mm=0.35).play_mm == 0.35
    for wrong in ({"position": weir.nut}, {"play_mm": 0.3}, {}, {"position": weir.nut, "play_mm": -1.0}):
        with pytest.raises(BadValue):
            measure(**wrong)
    with pytest.raises(BadValue, match="another type"):
        measure(position=make_position(component=weir.nuts), play_mm=0.3)


def test_a_reading_struck_out_lets_the_right_one_in(weir: Carriage) -> None:
    read(weir, "2024-03-01", 100)
    wrong = read(weir, "2024-03-10", 99_999)
    with pytest.raises(CounterWentBack):
        read(weir, "2024-03-12", 180)
    strike_out(by=weir.crew, record=wrong, reason="a digit too many")
    read(weir, "2024-03-12", 180)
    assert accumulated(weir) == [100, 180]


def test_a_reading_that_others_stand_on_is_replaced_first(weir: Carriage) -> None:
    read(weir, "2024-03-01", 5_000)
    reset = read(weir, "2024-03-10", 10, restarts="reset")
    read(weir, "2024-03-20", 60)
    with pytest.raises(BadValue, match="Enter the right reading first"):
        strike_out(by=weir.manager, record=reset, reason="it was 12")
    read(weir, "2024-03-10", 12, restarts="reset")
    strike_out(by=weir.manager, record=reset, reason="it was 12")
    assert accumulated(weir) == [5_000, 5_012, 5_060]


def test_what_a_struck_out_reading_measured_follows_the_right_one(weir: Carriage) -> None:
    visit = record_visit(
        by=weir.crew,
        module=weir.module,
        happened_at=at("2024-03-01"),
        counter=CounterEntry(strokes=81_000),
        changes=[PartChange(position=weir.nut, part=weir.n1)],
    )
    strike_out(by=weir.crew, record=Reading.objects.get(), reason="it was 61 000")
    fitting = Fitting.objects.get()
    assert fitting.strokes_at_fit is None
    read(weir, "2024-03-01", 61_000, visit=visit)
    fitting.refresh_from_db()
    assert fitting.strokes_at_fit == 61_000
    assert [row.strokes_at_fit for row in fitting.history.order_by("history_id")] == [81_000, None, 61_000]


def test_a_late_reset_moves_what_was_measured_after_it(weir: Carriage) -> None:
    read(weir, "2024-01-01", 500)
    record_visit(
        by=weir.crew,
        module=weir.module,
        happened_at=at("2024-03-01"),
        counter=CounterEntry(strokes=900),
        changes=[PartChange(position=weir.nut, part=weir.n1)],
    )
    read(weir, "2024-02-01", 100, restarts="reset")
    assert Fitting.objects.get().strokes_at_fit == 500 + 900


def test_only_those_who_see_the_module_may_read(weir: Carriage, tom: Person) -> None:
    for person in (tom, weir.contact):
        with pytest.raises(NotAllowed):
            record_reading(by=person, module=weir.module, read_at=at("2024-03-01"), counter=CounterEntry(strokes=1))
