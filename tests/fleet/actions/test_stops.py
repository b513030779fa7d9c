"""A module stands still: anybody who sees it may say so; crews say that it runs again."""

from __future__ import annotations

import uuid
from typing import Any

import pytest

from fleet.actions.end_stop import end_stop
from fleet.actions.errors import AlreadyDone, BadValue, NotAllowed
from fleet.actions.record_visit import record_visit
from fleet.actions.report_stop import report_stop
from fleet.models import Person, Stop
from tests.factories import Carriage, at, on

pytestmark = pytest.mark.django_db


def stop(weir: Carriage, day: str, time: str = "09:00", **fields: Any) -> Stop:
    return report_stop(by=weir.contact, module=weir.module, stopped_at=at(day, time), **fields)


def test_the_contact_reports_and_the_crew_ends_it(weir: Carriage, rosa: Person) -> None:
    reported = stop(weir, "2024-03-01", note="hums, does not move")
    assert (reported.reported_by, reported.site, reported.running_at) == (weir.contact, weir.site, None)
    ended = end_stop(by=rosa, stop=reported, running_at=at("2024-03-02"))
    assert (ended.running_at, ended.version) == (at("2024-03-02"), 2)
    assert end_stop(by=rosa, stop=reported, running_at=at("2024-03-02")).version == 2
    with pytest.raises(AlreadyDone, match="runs again since"):
        end_stop(by=rosa, stop=reported, running_at=at("2024-03-03"))


def test_a_contact_does_not_say_that_it_runs_again(weir: Carriage) -> None:
    with pytest.raises(NotAllowed):
        end_stop(by=weir.contact, stop=stop(weir, "2024-03-01"), running_at=at("2024-03-02"))


def test_a_module_stops_once_at_a_time(weir: Carriage) -> None:
    stop(weir, "2024-03-01")
    for day in ("2024-02-20", "2024-03-05"):
        with pytest.raises(AlreadyDone, match="stands still on record since"):
            stop(weir, day)


def test_a_stop_written_down_afterwards_lies_between_others(weir: Carriage) -> None:
    stop(weir, "2024-03-01", running_at=at("2024-03-05"))
    with pytest.raises(BadValue, match="stood still from"):
        stop(weir, "2024-03-03", running_at=at("2024-03-03", "10:00"))
    stop(weir, "2024-03-05", running_at=at("2024-03-06"))
    stop(weir, "2024-02-20", running_at=at("2024-03-01"))
    assert Stop.objects.count() == 3


def test_a_stop_before_a_visit_that_left_it_running_needs_its_end(weir: Carriage) -> None:
    record_visit(by=weir.crew, module=weir.module, happened_at=at("2024-03-04"))
    with pytest.raises(BadValue, match="say until when"):
        stop(weir, "2024-03-01")
    stop(weir, "2024-03-01", running_at=at("2024-03-04"))


def test_it_does_not_run_again_before_it_stopped(weir: Carriage) -> None:
    reported = stop(weir, "2024-03-01")
    with pytest.raises(BadValue) as refusal:
        end_stop(by=weir.crew, stop=reported, running_at=at("2024-02-28"))
    assert refusal.value.field == "running_at"


def test_the_same_key_reports_once(weir: Carriage) -> None:
    key = uuid.uuid4()
    assert stop(weir, "2024-03-01", entry_key=key) == stop(weir, "2024-03-01", entry_key=key)
    with pytest.raises(BadValue, match="used for another entry"):
        stop(weir, "2024-03-01", note="other words", entry_key=key)
    with pytest.raises(BadValue, match="used for another entry"):
        report_stop(by=weir.crew, module=weir.module, stopped_at=at("2024-03-01"), entry_key=key)


@pytest.mark.parametrize(
    ("fields", "field"),
    [
        ({"note": "x" * 10_000}, "note"),
        ({"note": "a\x00"}, "note"),
        ({"known_on": on("2024-02-28")}, "known_on"),
        ({"running_at": at("2424-03-01")}, "running_at"),
        ({"running_at": at("2024-03-02").replace(tzinfo=None)}, "running_at"),
    ],
)
def test_a_wrong_stop_is_refused_at_its_field(weir: Carriage, fields: dict[str, Any], field: str) -> None:
    with pytest.raises(BadValue) as refusal:
        stop(weir, "2024-03-01", **fields)
    assert refusal.value.field == field
    assert not Stop.objects.exists()


def test_a_visit_that_says_since_when_it_stood_writes_the_stop_whole(weir: Carriage) -> None:
    record_visit(by=weir.crew, module=weir.module, happened_at=at("2024-03-04"), stopped_at=at("2024-03-02"))
    only = Stop.objects.get()
    assert (only.stopped_at, only.running_at) == (at("2024-03-02"), at("2024-03-04"))
