"""A visit: Rosa (crew of the weir) logs what she did at the carriage; Tom is crew of another site."""

from __future__ import annotations

import uuid
from typing import Any

import pytest

from fleet.actions.entries import CounterEntry, FindingEntry, PartChange
from fleet.actions.errors import AlreadyDone, BadValue, CounterWentBack, NotAllowed, NothingFitted, PositionTaken
from fleet.actions.record_visit import record_visit
from fleet.models import Finding, Fitting, Reading, Stop, Visit
from tests.factories import Carriage, at, make_crew, make_mode, make_part, make_position, make_site, on

pytestmark = pytest.mark.django_db


@pytest.fixture
def weir() -> Carriage:
    return Carriage()


def visit_of(weir: Carriage, day: str = "2024-03-09", **fields: Any) -> Visit:
    return record_visit(by=weir.crew, module=weir.module, happened_at=at(day), **fields)


def nut_change(weir: Carriage, **fields: Any) -> PartChange:
    return PartChange(**{"position": weir.nut, "reason": "failed", "mode": weir.worn, "part": weir.n2, **fields})


def test_a_nut_change_is_one_visit_one_removal_one_fitting(weir: Carriage) -> None:
    old = weir.fit(weir.n1, "2024-01-10")
    visit = visit_of(weir, counter=CounterEntry(strokes=61_000), changes=[nut_change(weir)])
    old.refresh_from_db()
    new = Fitting.objects.running().get(module=weir.module)
    assert (old.removed_on, old.reason, old.mode, old.removed_visit) == (on("2024-03-09"), "failed", weir.worn, visit)
    assert (new.part, new.fitted_on, new.fitted_visit) == (weir.n2, on("2024-03-09"), visit)
    assert old.strokes_at_removal == new.strokes_at_fit == 61_000
    assert visit.site == weir.site
    assert visit.crew == visit.entered_by == weir.crew
    assert old.history.first().history_user == weir.crew
    assert old.version == 2


def test_the_day_is_the_sites_own(weir: Carriage) -> None:
    weir.site.zone = "Pacific/Auckland"
    weir.site.save()
    visit = record_visit(by=weir.crew, module=weir.module, happened_at=at("2024-03-09", "20:00"))
    assert visit.happened_on == on("2024-03-10")


def test_the_same_key_records_once_and_answers_the_same(weir: Carriage) -> None:
    weir.fit()
    key = uuid.uuid4()
    first = visit_of(weir, changes=[nut_change(weir)], entry_key=key)
    again = visit_of(weir, changes=[nut_change(weir)], entry_key=key)
    assert again == first
    assert Visit.objects.count() == 1
    assert Fitting.objects.count() == 2


def test_a_different_entry_under_a_used_key_is_refused(weir: Carriage) -> None:
    key = uuid.uuid4()
    visit_of(weir, note="all well", entry_key=key)
    with pytest.raises(BadValue, match="used for another entry"):
        visit_of(weir, note="something else", entry_key=key)
    with pytest.raises(BadValue, match="used for another entry"):
        visit_of(weir, "2024-03-10", note="all well", entry_key=key)
    assert Visit.objects.count() == 1


def test_a_refused_visit_leaves_nothing_behind(weir: Carriage) -> None:
    key = uuid.uuid4()
    wrong = make_part()
    with pytest.raises(BadValue):
        visit_of(weir, counter=CounterEntry(strokes=5), changes=[nut_change(weir, part=wrong)], entry_key=key)
    assert not Visit.objects.exists()
    assert not Reading.objects.exists()
    visit_of(weir, counter=CounterEntry(strokes=5), entry_key=key)


def test_crew_of_another_site_is_refused(weir: Carriage) -> None:
    tom = make_crew(make_site())
    with pytest.raises(NotAllowed, match="does not stand at a site of yours"):
        record_visit(by=tom, module=weir.module, happened_at=at("2024-03-09"))


def test_a_contact_logs_no_visit(weir: Carriage) -> None:
    with pytest.raises(NotAllowed, match="contact"):
        record_visit(by=weir.contact, module=weir.module, happened_at=at("2024-03-09"))


def test_a_counter_below_the_last_one_is_asked_back(weir: Carriage) -> None:
    visit_of(weir, "2024-03-03", counter=CounterEntry(strokes=51_877))
    with pytest.raises(CounterWentBack) as refusal:
        visit_of(weir, "2024-03-09", counter=CounterEntry(strokes=48_210))
    assert refusal.value.data["last"] == 51_877
    assert refusal.value.data["read_on"] == on("2024-03-03")
    assert "Was the counter changed?" in refusal.value.message
    visit_of(weir, "2024-03-09", counter=CounterEntry(strokes=210, counter="C-2"))


def test_a_position_that_holds_a_part_asks_why_it_came_out(weir: Carriage) -> None:
    weir.fit()
    with pytest.raises(PositionTaken) as refusal:
        visit_of(weir, changes=[nut_change(weir, reason="", mode=None)])
    assert refusal.value.field == "reason"
    assert refusal.value.data["position"] == "NUT"


def test_nothing_comes_out_of_an_empty_position(weir: Carriage) -> None:
    with pytest.raises(NothingFitted):
        visit_of(weir, changes=[nut_change(weir)])


def test_a_late_visit_before_a_later_change_is_refused(weir: Carriage) -> None:
    weir.fit(weir.n1, "2024-01-10")
    visit_of(weir, "2024-03-09", changes=[nut_change(weir)])
    with pytest.raises(AlreadyDone, match="came out on"):
        visit_of(weir, "2024-02-01", changes=[nut_change(weir)])


def test_a_position_left_empty_is_filled_at_the_next_visit(weir: Carriage) -> None:
    weir.fit()
    first = visit_of(weir, left="stopped", changes=[nut_change(weir, part=None)])
    assert Stop.objects.get().visit == first
    visit_of(weir, "2024-03-12", changes=[PartChange(position=weir.nut, part=weir.n2)])
    stop = Stop.objects.get()
    assert (stop.stopped_at, stop.running_at) == (at("2024-03-09"), at("2024-03-12"))


def test_a_bowed_screw_that_broke_the_nut_is_its_cause(weir: Carriage) -> None:
    nut, screw = weir.fit(), weir.fit(weir.s1)
    taken = PartChange(position=weir.nut, reason="taken with another", part=weir.n2, caused_by_position=weir.screw)
    bowed = PartChange(position=weir.screw, reason="failed", mode=weir.bowed, part=weir.s1)
    visit_of(weir, changes=[taken, bowed])
    nut.refresh_from_db()
    assert nut.caused_by == screw


def test_a_cause_that_did_not_come_out_is_refused(weir: Carriage) -> None:
    weir.fit()
    taken = PartChange(position=weir.nut, reason="taken with another", caused_by_position=weir.screw)
    with pytest.raises(BadValue, match="named as the cause") as refusal:
        visit_of(weir, changes=[taken])
    assert refusal.value.data["row"] == 0


def test_findings_without_a_change(weir: Carriage) -> None:
    visit = visit_of(weir, findings=[FindingEntry(weir.nut, "adjusted", note="half a turn")], play={weir.nut: 0.4})
    finding = Finding.objects.get()
    assert (finding.visit, finding.finding, finding.note) == (visit, "adjusted", "half a turn")
    assert Reading.objects.get().play_mm == 0.4


@pytest.mark.parametrize(
    ("fields", "field"),
    [
        ({"note": "a\x00b"}, "note"),
        ({"note": "x" * 10_000}, "note"),
        ({"note": "\ud800"}, "note"),
        ({"left": "on fire"}, "left"),
        ({"counter": CounterEntry()}, "strokes"),
        ({"counter": CounterEntry(strokes=-1)}, "strokes"),
        ({"counter": CounterEntry(strokes=10**30)}, "strokes"),
        ({"counter": CounterEntry(hours=float("nan"))}, "hours"),
        ({"counter": CounterEntry(strokes=5, counter="c" * 61)}, "counter"),
        ({"counter": CounterEntry(strokes=5, restarts="again")}, "restarts"),
        ({"counter": CounterEntry(strokes=5, restarts="rolled over")}, "restarts"),
        ({"known_on": on("2024-03-08")}, "known_on"),
        ({"known_on": on("2424-03-08")}, "known_on"),
        ({"stopped_at": at("2024-03-10")}, "stopped_at"),
        ({"code": "no code"}, "code"),
        ({"code": "x" * 10_000}, "code"),
    ],
)
def test_a_bad_value_is_refused_at_its_field(weir: Carriage, fields: dict[str, Any], field: str) -> None:
    with pytest.raises(BadValue) as refusal:
        visit_of(weir, **fields)
    assert refusal.value.field == field
    assert not Visit.objects.exists()


def test_a_time_needs_a_zone_and_lies_in_the_past(weir: Carriage) -> None:
    for wrong in (at("2024-03-09").replace(tzinfo=None), at("2424-03-09"), at("1024-03-09"), on("2024-03-09")):
        with pytest.raises(BadValue) as refusal:
            record_visit(by=weir.crew, module=weir.module, happened_at=wrong)  # type: ignore[arg-type]
        assert refusal.value.field == "happened_at"


def test_what_belongs_elsewhere_is_refused(weir: Carriage) -> None:
    weir.fit()
    foreign = {
        "position": nut_change(weir, position=make_position(component=weir.nuts)),
        "part": nut_change(weir, part=weir.s1),
        "mode": nut_change(weir, mode=make_mode()),
    }
    for field, change in foreign.items():
        with pytest.raises(BadValue) as refusal:
            visit_of(weir, changes=[change])
        assert refusal.value.field == field
    misfit = make_part(component=weir.nuts, fits_types=[make_position().type])
    with pytest.raises(BadValue, match="does not fit"):
        visit_of(weir, changes=[nut_change(weir, part=misfit)])


def test_an_ended_part_may_still_be_fitted_from_stock(weir: Carriage) -> None:
    ended = make_part(component=weir.nuts, state="ended")
    visit_of(weir, changes=[PartChange(position=weir.nut, part=ended)])
    assert Fitting.objects.get().part == ended


def test_a_scrapped_module_is_not_visited_later(weir: Carriage) -> None:
    weir.module.scrapped_on = on("2024-02-01")
    weir.module.save()
    with pytest.raises(BadValue, match="scrapped"):
        visit_of(weir)


def test_one_position_is_changed_once_a_visit(weir: Carriage) -> None:
    weir.fit()
    with pytest.raises(BadValue, match="named twice"):
        visit_of(weir, changes=[nut_change(weir), nut_change(weir)])


def test_a_late_running_visit_leaves_the_later_stop_standing(weir: Carriage) -> None:
    visit_of(weir, "2024-03-01", left="stopped")
    last = visit_of(weir, "2024-03-09", left="stopped")
    visit_of(weir, "2024-03-05", left="running")
    first, second = Stop.objects.order_by("stopped_at")
    assert (first.stopped_at, first.running_at) == (at("2024-03-01"), at("2024-03-05"))
    assert (second.stopped_at, second.running_at, second.visit) == (at("2024-03-09"), None, last)


def test_a_late_stopped_visit_ends_with_the_next_running_one(weir: Carriage) -> None:
    visit_of(weir, "2024-03-09", left="running")
    visit_of(weir, "2024-03-05", left="stopped")
    stop = Stop.objects.get()
    assert (stop.stopped_at, stop.running_at) == (at("2024-03-05"), at("2024-03-09"))


def test_a_nut_change_takes_few_queries(weir: Carriage, django_assert_max_num_queries: Any) -> None:
    weir.fit()
    visit_of(weir, "2024-02-01", counter=CounterEntry(strokes=1))
    with django_assert_max_num_queries(45):
        visit_of(weir, counter=CounterEntry(strokes=9), changes=[nut_change(weir)], entry_key=uuid.uuid4())
