"""The bench: Greta works at the depot, Rosa is crew of the weir, Ines plans."""

from __future__ import annotations

import uuid
from collections.abc import Iterator
from typing import Any

import pytest

from fleet.actions.book_hours import book_hours
from fleet.actions.change_part_on_bench import change_part_on_bench
from fleet.actions.correct_record import correct_record
from fleet.actions.entries import FindingEntry, PartChange
from fleet.actions.errors import AlreadyDone, BadValue, ChangedSince, NotAllowed, NotEnough, RecordError
from fleet.actions.finish_job import finish_job
from fleet.actions.issue_part import issue_part
from fleet.actions.move_job import move_job
from fleet.actions.place_module import place_module
from fleet.actions.record_visit import record_visit
from fleet.actions.save_module import save_module
from fleet.actions.save_site import save_site
from fleet.actions.set_capacity import set_capacity
from fleet.actions.strike_out import strike_out
from fleet.actions.take_away_module import take_away_module
from fleet.actions.take_in_module import take_in_module
from fleet.bench import hours_available, hours_booked, on_the_way, pool, turn_round
from fleet.models import BenchCapacity, BenchHours, BenchJob, Fitting, Module, Person, Placement, Site, StockMove, Stop
from fleet.module_clock import ModuleClock
from tests.factories import Carriage, at, make_bench, make_depot, make_site, make_store, on, stock
from tests.fleet.invariants import broken_rules
from tests.fleet.invariants_stock import broken_stock_rules


@pytest.fixture(autouse=True)
def sound_afterwards(db: None) -> Iterator[None]:
    yield
    assert broken_stock_rules() == []


pytestmark = pytest.mark.django_db


@pytest.fixture
def depot() -> Site:
    return make_depot(code="YARD", zone="Europe/Lisbon")


@pytest.fixture
def greta(depot: Site) -> Person:
    return make_bench(depot, name="Greta")


@pytest.fixture
def job(weir: Carriage, rosa: Person, greta: Person, depot: Site) -> BenchJob:
    send(weir, rosa)
    return take_in_module(by=greta, module=weir.module, depot=depot, received_on=on("2024-03-11"), reason="screw bowed")


def send(weir: Carriage, rosa: Person, day: str = "2024-03-09", **fields: Any) -> Any:
    return record_visit(by=rosa, module=weir.module, happened_at=at(day), left="to bench", **fields)


def out(weir: Carriage, **fields: Any) -> PartChange:
    return PartChange(position=weir.nut, reason="failed", mode=weir.worn, part=weir.n2, **fields)


def test_what_a_visit_sent_is_on_the_way_until_it_is_taken_in(
    weir: Carriage, rosa: Person, greta: Person, depot: Site
) -> None:
    send(weir, rosa)
    assert [visit.module for visit in on_the_way(greta)] == [weir.module]
    assert Stop.objects.now().get().stopped_at == at("2024-03-09")
    job = take_in_module(by=greta, module=weir.module, depot=depot, received_on=on("2024-03-11"))
    assert (job.stage, job.received_on, job.depot) == ("received", on("2024-03-11"), depot)
    assert Placement.objects.current().get(module=weir.module).site == depot
    assert not on_the_way(greta).exists()
    assert Stop.objects.get().running_at == at("2024-03-11", "00:00")  # Lisbon keeps the hour of Greenwich in March
    assert broken_rules() == []


def test_a_bench_takes_in_only_what_was_sent(weir: Carriage, greta: Person, ines: Person, depot: Site) -> None:
    with pytest.raises(NotAllowed, match="No visit sent"):
        take_in_module(by=greta, module=weir.module, depot=depot)
    assert take_in_module(by=ines, module=weir.module, depot=depot).module == weir.module


def test_from_the_pool_it_is_taken_in_where_it_lies(weir: Carriage, greta: Person, ines: Person, depot: Site) -> None:
    place_module(by=ines, module=weir.module, site=depot, from_on=on("2024-03-01"))
    assert list(pool(Module.objects.all())) == [weir.module]
    take_in_module(by=greta, module=weir.module, depot=depot, received_on=on("2024-03-05"))
    assert not pool(Module.objects.all()).exists()
    assert Placement.objects.filter(module=weir.module).count() == 2


def test_a_module_is_taken_in_once(job: BenchJob, weir: Carriage, greta: Person, depot: Site) -> None:
    with pytest.raises(AlreadyDone, match="was taken in already"):
        take_in_module(by=greta, module=weir.module, depot=depot)


def test_the_same_key_takes_in_once(weir: Carriage, rosa: Person, greta: Person, depot: Site) -> None:
    send(weir, rosa)
    key = uuid.uuid4()
    jobs = {take_in_module(by=greta, module=weir.module, depot=depot, entry_key=key).pk for _ in range(2)}
    assert len(jobs) == 1


def test_stages_hours_and_the_end(job: BenchJob, greta: Person, ines: Person, weir: Carriage) -> None:
    move_job(by=greta, job=job, stage="waiting")
    began = move_job(by=greta, job=job, stage="on the bench", day=on("2024-03-12"))
    assert began.started_on == on("2024-03-12")
    waiting = move_job(by=greta, job=job, stage="waiting for parts", waits_for=weir.s1)
    assert waiting.waits_for == weir.s1
    move_job(by=greta, job=job, stage="on the bench", day=on("2024-03-14"))
    job.refresh_from_db()
    assert (job.started_on, job.waits_for) == (on("2024-03-12"), None)
    book_hours(by=greta, job=job, hours=2.5, day=on("2024-03-12"))
    book_hours(by=greta, job=job, hours=1, day=on("2024-03-12"))
    book_hours(by=ines, job=job, hours=3, day=on("2024-03-19"), person=greta)
    assert hours_booked(BenchHours.objects.all(), on("2024-03-11"), on("2024-03-25")) == {
        on("2024-03-11"): 3.5,
        on("2024-03-18"): 3.0,
    }
    done = finish_job(by=greta, job=job, outcome="ready", finished_on=on("2024-03-20"))
    assert (done.stage, done.outcome) == ("finished", "ready")
    assert list(pool(Module.objects.all())) == [weir.module]
    assert turn_round(BenchJob.objects.all()) == [9]
    assert (
        finish_job(by=greta, job=job, outcome="ready", finished_on=on("2024-03-20"), version=1) == done
    )  # a double tap
    with pytest.raises(AlreadyDone, match=r"was finished on 20.March 2024 as ready"):
        book_hours(by=greta, job=job, hours=1, day=on("2024-03-20"))


def test_work_begins_with_the_first_hour_or_part(job: BenchJob, greta: Person) -> None:
    book_hours(by=greta, job=job, hours=1, day=on("2024-03-14"))
    book_hours(by=greta, job=job, hours=1, day=on("2024-03-13"))
    job.refresh_from_db()
    assert (job.started_on, job.stage) == (on("2024-03-13"), "received")
    done = finish_job(by=greta, job=job, outcome="ready", finished_on=on("2024-03-20"))
    assert done.started_on == on("2024-03-13")


def test_hours_have_their_limits(job: BenchJob, greta: Person, rosa: Person, ines: Person) -> None:
    book_hours(by=greta, job=job, hours=20, day=on("2024-03-12"))
    with pytest.raises(BadValue, match="longer than 24 hours"):
        book_hours(by=greta, job=job, hours=5, day=on("2024-03-12"))
    for hours in (0, -1, float("nan"), "3", 25):
        with pytest.raises(BadValue):
            book_hours(by=greta, job=job, hours=hours, day=on("2024-03-13"))  # type: ignore[arg-type]
    with pytest.raises(BadValue, match="before"):
        book_hours(by=greta, job=job, hours=1, day=on("2024-03-10"))
    with pytest.raises(BadValue, match="does not work at the bench"):
        book_hours(by=ines, job=job, hours=1, person=rosa, day=on("2024-03-12"))
    with pytest.raises(NotAllowed):
        book_hours(by=rosa, job=job, hours=1, day=on("2024-03-12"))


def test_hours_sent_twice_are_booked_once(job: BenchJob, greta: Person) -> None:
    key = uuid.uuid4()
    for _ in range(2):
        book_hours(by=greta, job=job, hours=2, day=on("2024-03-12"), entry_key=key)
    assert BenchHours.objects.get().hours == 2


def test_a_part_changed_on_the_bench_belongs_to_the_job_and_leaves_its_store(
    weir: Carriage, rosa: Person, greta: Person, depot: Site
) -> None:
    old = weir.fit(weir.n1, "2024-01-10")
    send(weir, rosa, findings=[FindingEntry(position=weir.nut, finding="failed", mode=weir.worn)])
    job = take_in_module(by=greta, module=weir.module, depot=depot, received_on=on("2024-03-11"))
    shelf = make_store(site=depot)
    with pytest.raises(NotEnough):
        change_part_on_bench(by=greta, job=job, entry=out(weir), day=on("2024-03-13"), store=shelf)
    assert not Fitting.objects.filter(part=weir.n2).exists()
    stock(shelf, weir.n2, 1)
    key = uuid.uuid4()
    for _ in range(2):
        change_part_on_bench(
            by=greta, job=job, entry=out(weir, failed_on=on("2024-03-09")), day=on("2024-03-13"), store=shelf,
            entry_key=key,
        )  # fmt: skip
    old.refresh_from_db()
    new = Fitting.objects.get(part=weir.n2)
    assert (old.job, old.removed_on, old.failed_on, old.removed_visit) == (
        job,
        on("2024-03-13"),
        on("2024-03-09"),
        None,
    )
    assert (new.job, new.fitted_on, new.fitted_visit) == (job, on("2024-03-13"), None)
    assert StockMove.objects.get(kind="issue").job == job
    assert broken_rules() == []


def test_parts_do_not_age_through_a_whole_job(weir: Carriage, rosa: Person, greta: Person, depot: Site) -> None:
    """In service from 10 January to the visit of 9 March; the way, the job and the pool count for nothing."""
    weir.fit(weir.s1, "2024-01-10")
    send(weir, rosa)
    job = take_in_module(by=greta, module=weir.module, depot=depot, received_on=on("2024-03-11"))
    move_job(by=greta, job=job, stage="on the bench", day=on("2024-03-12"))
    finish_job(by=greta, job=job, outcome="ready", finished_on=on("2024-04-20"))
    place_module(by=weir.manager, module=weir.module, site=weir.site, from_on=on("2024-05-01"))
    clock = ModuleClock(weir.module, on("2024-05-11").toordinal())
    fitted, sent, again = (clock.at("days", on(day).toordinal()) for day in ("2024-01-10", "2024-03-09", "2024-05-01"))
    assert fitted is not None
    assert sent is not None
    assert again is not None
    assert sent - fitted == 59
    assert again - sent == pytest.approx(9 / 24, abs=0.05)  # the visit was at nine in the morning
    assert clock.at("days", on("2024-05-11").toordinal()) == again + 10


def test_a_depot_with_jobs_stays_one(job: BenchJob, ines: Person) -> None:
    with pytest.raises(BadValue, match="so it stays a depot"):
        save_site(by=ines, site=job.depot, version=1, kind="field")


def test_a_module_with_an_open_job_does_not_leave(job: BenchJob, weir: Carriage, ines: Person) -> None:
    with pytest.raises(AlreadyDone, match="has bench job"):
        place_module(by=ines, module=weir.module, site=weir.site, from_on=on("2024-03-20"))
    with pytest.raises(AlreadyDone, match="has bench job"):
        take_away_module(by=ines, module=weir.module, to_on=on("2024-03-20"))
    place_module(by=ines, module=weir.module, site=job.depot, bay="rack 3", from_on=on("2024-03-20"))
    job.refresh_from_db()
    assert job.finished_on is None


def test_scrapped_on_the_bench_it_is_scrapped_in_the_book(job: BenchJob, weir: Carriage, greta: Person) -> None:
    fitting = weir.fit(weir.n1, "2024-01-10")
    finish_job(by=greta, job=job, outcome="scrapped", finished_on=on("2024-03-20"), note="frame cracked")
    weir.module.refresh_from_db()
    fitting.refresh_from_db()
    assert weir.module.scrapped_on == on("2024-03-20")
    assert (fitting.reason, fitting.removed_on) == ("module withdrawn", on("2024-03-20"))
    assert not Placement.objects.current().filter(module=weir.module).exists()
    assert broken_rules() == []


def test_scrapped_in_the_book_its_job_ends(job: BenchJob, weir: Carriage, ines: Person) -> None:
    save_module(by=ines, module=weir.module, version=1, scrapped_on=on("2024-03-25"))
    job.refresh_from_db()
    assert (job.finished_on, job.outcome, job.stage) == (on("2024-03-25"), "scrapped", "finished")


def test_withdrawn_it_leaves_the_depot_and_is_not_in_the_pool(job: BenchJob, weir: Carriage, greta: Person) -> None:
    finish_job(by=greta, job=job, outcome="withdrawn", finished_on=on("2024-03-20"))
    assert not pool(Module.objects.all()).exists()
    assert Module.objects.with_state().get(pk=weir.module.pk).state == "without a place"


def test_of_two_edits_of_a_job_the_second_is_told(job: BenchJob, greta: Person) -> None:
    move_job(by=greta, job=job, stage="waiting", version=1)
    with pytest.raises(ChangedSince):
        finish_job(by=greta, job=job, outcome="ready", version=1)


def test_a_job_is_corrected_within_its_stay(job: BenchJob, ines: Person, greta: Person) -> None:
    finish_job(by=greta, job=job, outcome="ready", finished_on=on("2024-03-20"))
    job.refresh_from_db()
    with pytest.raises(BadValue, match="does not stand at YARD"):
        correct_record(by=ines, record=job, version=2, changes={"received_on": on("2024-03-01")}, reason="label")
    correct_record(by=ines, record=job, version=2, changes={"finished_on": None, "outcome": ""}, reason="not yet ready")
    job.refresh_from_db()
    assert (job.stage, job.finished_on) == ("waiting", None)


def test_its_stay_keeps_its_job(job: BenchJob, weir: Carriage, ines: Person) -> None:
    stay = Placement.objects.current().get(module=weir.module)
    with pytest.raises(BadValue, match="does not stand at YARD"):
        correct_record(by=ines, record=stay, version=1, changes={"from_on": on("2024-03-15")}, reason="later")
    with pytest.raises(BadValue, match="does not stand at YARD"):
        strike_out(by=ines, record=stay, reason="never")


def test_hours_and_jobs_are_struck_out(job: BenchJob, greta: Person, ines: Person) -> None:
    row = book_hours(by=greta, job=job, hours=2, day=on("2024-03-12"))
    with pytest.raises(BadValue, match=r"1.booking of hours"):
        strike_out(by=ines, record=job, reason="wrong module")
    correct_record(by=greta, record=row, version=1, changes={"hours": 3.0}, reason="mistyped")
    row.refresh_from_db()
    assert row.hours == 3
    strike_out(by=greta, record=row, reason="other job")
    strike_out(by=ines, record=job, reason="wrong module")
    assert not BenchJob.objects.open().exists()


def test_parts_go_to_an_open_job(job: BenchJob, weir: Carriage, greta: Person, depot: Site) -> None:
    shelf = make_store(site=depot)
    stock(shelf, weir.s1, 1)
    assert issue_part(by=greta, store=shelf, part=weir.s1, job=job).job == job
    finish_job(by=greta, job=job, outcome="ready", finished_on=on("2024-03-20"))
    stock(shelf, weir.s1, 1)
    with pytest.raises(AlreadyDone, match="finished before that day"):
        issue_part(by=greta, store=shelf, part=weir.s1, job=job)


def test_capacity_is_set_by_week_with_closed_days(ines: Person, greta: Person) -> None:
    set_capacity(
        by=ines, first_week=on("2024-12-11"), last_week=on("2024-12-31"), hours=40,
        closed_days=[on("2024-12-25"), on("2024-12-26"), on("2024-12-28")], note="holidays",
    )  # fmt: skip
    assert hours_available(on("2024-12-09"), on("2025-01-06")) == {
        on("2024-12-09"): 40, on("2024-12-16"): 40, on("2024-12-23"): 24, on("2024-12-30"): 40,
    }  # fmt: skip
    set_capacity(by=ines, first_week=on("2024-12-23"), hours=0, note="closed")
    assert BenchCapacity.objects.get(week=on("2024-12-23")).hours == 0
    with pytest.raises(NotAllowed):
        set_capacity(by=greta, first_week=on("2024-12-23"), hours=40)
    with pytest.raises(BadValue, match="outside these weeks"):
        set_capacity(by=ines, first_week=on("2024-12-23"), hours=40, closed_days=[on("2025-03-03")])


@pytest.mark.parametrize("day", ["0001-01-01", "1899-12-31", "9999-12-31"])
def test_capacity_of_weeks_that_nobody_plans_is_refused(ines: Person, day: str) -> None:
    """A closed day in the last week of the calendar has no week after it."""
    for weeks in ({"first_week": on(day)}, {"first_week": on("2024-12-23"), "last_week": on(day)}):
        with pytest.raises(BadValue, match="Check"):
            set_capacity(by=ines, hours=40, closed_days=[on(day)], **weeks)
    assert not BenchCapacity.objects.exists()


def test_the_bench_of_another_depot_has_no_say(job: BenchJob) -> None:
    other = make_bench(make_depot())
    for verb in (
        lambda: move_job(by=other, job=job, stage="waiting"),
        lambda: book_hours(by=other, job=job, hours=1, day=on("2024-03-12")),
        lambda: finish_job(by=other, job=job, outcome="ready"),
    ):
        with pytest.raises(RecordError):
            verb()


def test_a_visit_said_otherwise_moves_its_stop(weir: Carriage, rosa: Person, ines: Person) -> None:
    visit = send(weir, rosa)
    correct_record(by=ines, record=visit, version=1, changes={"left": "running"}, reason="it stayed")
    assert not Stop.objects.now().exists()
    assert not on_the_way(ines).exists()


def test_jobs_of_one_module_do_not_overlap(job: BenchJob, weir: Carriage, greta: Person, depot: Site) -> None:
    finish_job(by=greta, job=job, outcome="ready", finished_on=on("2024-03-20"))
    with pytest.raises(AlreadyDone, match="Enter days outside that job"):
        take_in_module(by=greta, module=weir.module, depot=depot, received_on=on("2024-03-15"))
    with pytest.raises(BadValue, match="is no depot"):
        take_in_module(by=greta, module=weir.module, depot=make_site(), received_on=on("2024-03-25"))
