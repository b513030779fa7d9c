"""Random sequences of entries, corrections, strike-outs and repeats; after each, everything that must hold holds."""

from __future__ import annotations

import datetime as dt
import uuid
from collections.abc import Callable
from typing import Any

import pytest
from django.db import transaction
from hypothesis import HealthCheck, Phase, settings
from hypothesis import strategies as st
from hypothesis.stateful import RuleBasedStateMachine, initialize, invariant, rule, run_state_machine_as_test

from fleet.actions.correct_record import correct_record
from fleet.actions.end_stop import end_stop
from fleet.actions.entries import CounterEntry, FindingEntry, PartChange
from fleet.actions.errors import Collided, RecordError
from fleet.actions.fit_part import fit_part
from fleet.actions.place_module import place_module
from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.actions.record_reading import record_reading
from fleet.actions.record_visit import record_visit
from fleet.actions.remove_part import remove_part
from fleet.actions.report_stop import report_stop
from fleet.actions.save_module import save_module
from fleet.actions.strike_out import strike_out
from fleet.actions.take_away_module import take_away_module
from fleet.models import (
    ClockPoint,
    DataVersion,
    Finding,
    Fitting,
    FittingClock,
    FoundKind,
    Left,
    Placement,
    Reading,
    RemovalReason,
    Restart,
    Stop,
    Visit,
)
from tests.factories import Carriage, make_depot, make_site
from tests.fleet.invariants import broken_rules

FIRST = dt.date(2024, 1, 1)
DAYS = st.integers(0, 24).map(lambda number: FIRST + dt.timedelta(days=number))
MAYBE_DAYS = st.none() | DAYS
MOSTLY_DAYS = st.none() | DAYS | DAYS | DAYS
HOURS = st.integers(0, 24 * 24)
REASONS = st.sampled_from(RemovalReason.values)
MOSTLY = st.sampled_from([True, True, True, False])
SELDOM = st.sampled_from([False, False, False, False, True])
FEW = st.integers(0, 5)
FITTING_FIELDS = {
    "fitted_on": MAYBE_DAYS,
    "removed_on": MAYBE_DAYS,
    "failed_on": MAYBE_DAYS,
    "last_good_on": MAYBE_DAYS,
    "reason": REASONS,
    "lot": st.sampled_from(["", "L7"]),
}


def instant(hours: int) -> dt.datetime:
    return dt.datetime(2024, 1, 1, tzinfo=dt.UTC) + dt.timedelta(hours=hours)


INSTANTS = HOURS.map(instant)


@st.composite
def counters(draw: Any) -> tuple[int, str, str]:
    """How far the face is from ten strokes an hour, the serial, and whether it started again."""
    wild = draw(st.integers(0, 3)) == 0
    off = draw(st.integers(-3000, 3000)) if wild else draw(st.integers(0, 9))
    counter = draw(st.sampled_from(["C-1", "C-2"])) if draw(SELDOM) else ""
    return off, counter, draw(st.sampled_from(Restart.values)) if draw(SELDOM) else ""


class Records(RuleBasedStateMachine):
    """One carriage, three places, and people who enter whatever comes to mind."""

    @initialize()
    def world(self) -> None:
        self.outer = transaction.atomic()
        self.outer.__enter__()
        self.weir = Carriage(from_on=FIRST)
        self.module = self.weir.module
        self.by = self.weir.manager
        self.sites = [self.weir.site, make_site(zone="Pacific/Auckland"), make_depot(zone="America/Lima")]
        rebuild_clocks([self.module.pk])
        self.hours = 0
        self.repeats: list[tuple[Callable[..., Any], dict[str, Any], Any]] = []

    def teardown(self) -> None:
        """What is derived was kept up to date all along; then the next sequence finds an empty book."""
        if hasattr(self, "outer"):
            before = self.derived()
            rebuild_clocks([self.module.pk])
            assert self.derived() == before
            transaction.set_rollback(True)
            self.outer.__exit__(None, None, None)

    def attempt(self, action: Callable[..., Any], **entry: Any) -> Any:
        """Refused in words or recorded; a refusal leaves nothing behind."""
        before = self.print_of_the_book()
        try:
            answer = action(by=self.by, **entry)
        except RecordError as refusal:
            self.check_refusal(refusal, before)
            return None
        if entry.get("entry_key"):
            self.repeats.append((action, entry, answer))
        return answer

    def check_refusal(self, refusal: RecordError, before: tuple[int, ...]) -> None:
        assert refusal.message[-1] in ".?", refusal.message
        assert not isinstance(refusal, Collided), "the database had to refuse what the action let through"
        assert self.print_of_the_book() == before

    def print_of_the_book(self) -> tuple[int, ...]:
        kinds = (Visit, Fitting, Stop, Finding, Placement)
        return (DataVersion.current(), Reading.objects.count(), *(kind.history.count() for kind in kinds))

    def some(self, kind: Any, number: int) -> Any:
        rows = list(kind.objects.filter(**({"module": self.module} if kind is not Finding else {})).order_by("pk"))
        return rows[number % len(rows)] if rows else None

    def moment(self, late: bool, hours: int) -> dt.datetime:
        """Time goes on from entry to entry, unless something is entered late."""
        if late:
            return instant(hours)
        self.hours += hours % 30
        return instant(self.hours)

    def face(self, at: dt.datetime, said: tuple[int, str, str] | None) -> CounterEntry | None:
        if said is None:
            return None
        off, counter, restarts = said
        hours = (at - instant(0)).total_seconds() / 3600
        strokes = 7 if restarts else max(0, round(hours * 10) + off)
        return CounterEntry(strokes=strokes, hours=None if off % 2 else hours, counter=counter, restarts=restarts)

    def nut_change(self, reason: str, part: Any, cause: bool, sensible: bool) -> PartChange:
        empty = not Fitting.objects.running().filter(module=self.module, position=self.weir.nut).exists()
        if sensible:
            reason = "" if empty else ("taken with another" if cause else reason)
            part = part or (self.weir.n2 if empty else None)
        behind = self.weir.screw if cause else None
        return PartChange(self.weir.nut, reason=reason, part=part, caused_by_position=behind)

    @rule(late=SELDOM, hours=HOURS, left=st.sampled_from(Left.values), counter=st.none() | counters())
    def look(self, late: bool, hours: int, left: str, counter: Any) -> None:
        at = self.moment(late, hours)
        findings = [FindingEntry(self.weir.nut, FoundKind.CLEANED)]
        self.attempt(
            record_visit,
            module=self.module,
            happened_at=at,
            left=left,
            counter=self.face(at, counter),
            findings=findings,
            entry_key=uuid.uuid4(),
        )

    @rule(late=SELDOM, hours=HOURS, counter=st.none() | counters(), reason=REASONS, part=st.sampled_from([0, 1, 2]),
          screw=st.booleans(), sensible=MOSTLY)  # fmt: skip
    def change_parts(
        self, late: bool, hours: int, counter: Any, reason: str, part: int, screw: bool, sensible: bool
    ) -> None:
        at = self.moment(late, hours)
        bowed = Fitting.objects.running().filter(module=self.module, position=self.weir.screw).exists()
        screw_reason = "failed" if bowed or not sensible else ""
        changes = [
            self.nut_change(reason, [None, self.weir.n1, self.weir.n2][part], screw and bool(screw_reason), sensible)
        ]
        if screw:
            mode = self.weir.bowed if screw_reason else None
            changes.append(PartChange(self.weir.screw, reason=screw_reason, mode=mode, part=self.weir.s1))
        self.attempt(
            record_visit,
            module=self.module,
            happened_at=at,
            left=Left.RUNNING,
            counter=self.face(at, counter),
            changes=changes,
            entry_key=uuid.uuid4(),
        )

    @rule(number=FEW)
    def repeat(self, number: int) -> None:
        if self.repeats:
            action, entry, answer = self.repeats[number % len(self.repeats)]
            before = self.print_of_the_book()[1:]
            assert action(by=self.by, **entry) == answer
            assert self.print_of_the_book()[1:] == before

    @rule(day=MOSTLY_DAYS, part=st.sampled_from(["n1", "n2", "s1"]))
    def fit(self, day: Any, part: str) -> None:
        position = self.weir.screw if part == "s1" else self.weir.nut
        self.attempt(fit_part, module=self.module, position=position, part=getattr(self.weir, part), fitted_on=day)

    @rule(number=FEW, lasted=st.integers(-2, 12), reason=REASONS, failed=st.none() | MAYBE_DAYS)
    def remove(self, number: int, lasted: int, reason: str, failed: Any) -> None:
        fitting = self.some(Fitting, number)
        if fitting is not None:
            day = (fitting.fitted_on or FIRST) + dt.timedelta(days=lasted)
            self.attempt(remove_part, fitting=fitting, removed_on=day, reason=reason, failed_on=failed)

    @rule(late=st.booleans(), hours=HOURS, counter=counters(), number=FEW, with_visit=st.booleans())
    def read(self, late: bool, hours: int, counter: Any, number: int, with_visit: bool) -> None:
        visit = self.some(Visit, number) if with_visit else None
        at = visit.happened_at if visit is not None else self.moment(late, hours)
        self.attempt(
            record_reading,
            module=self.module,
            read_at=at,
            counter=self.face(at, counter),
            visit=visit,
            entry_key=uuid.uuid4(),
        )

    @rule(late=st.booleans(), hours=HOURS, lasted=st.none() | st.integers(0, 60))
    def stop(self, late: bool, hours: int, lasted: Any) -> None:
        at = self.moment(late, hours)
        until = None if lasted is None else at + dt.timedelta(hours=lasted)
        self.attempt(report_stop, module=self.module, stopped_at=at, running_at=until, entry_key=uuid.uuid4())

    @rule(number=FEW, lasted=st.integers(-9, 90), any_stop=SELDOM)
    def run_again(self, number: int, lasted: int, any_stop: bool) -> None:
        stop = self.some(Stop, number) if any_stop else Stop.objects.now().filter(module=self.module).first()
        if stop is not None:
            self.attempt(end_stop, stop=stop, running_at=stop.stopped_at + dt.timedelta(hours=lasted))

    @rule(site=st.integers(0, 2), day=DAYS, same_day=st.booleans())
    def place(self, site: int, day: Any, same_day: bool) -> None:
        self.attempt(place_module, module=self.module, site=self.sites[site], from_on=day, same_day=same_day)

    @rule(day=DAYS, really=SELDOM)
    def take_away(self, day: Any, really: bool) -> None:
        if not really:
            return
        self.attempt(take_away_module, module=self.module, to_on=day)

    @rule(number=FEW, old=st.booleans(), fields=st.fixed_dictionaries({}, optional=FITTING_FIELDS))
    def correct_fitting(self, number: int, old: bool, fields: dict[str, Any]) -> None:
        self.correct(Fitting, number, old, fields)

    @rule(number=FEW, old=SELDOM, shift=st.integers(-60, 60), left=st.none() | st.sampled_from(Left.values))
    def correct_visit(self, number: int, old: bool, shift: int, left: str | None) -> None:
        visit = self.some(Visit, number)
        if visit is not None:
            fields = {"happened_at": visit.happened_at + dt.timedelta(hours=shift)}
            self.correct(Visit, number, old, fields if left is None else {**fields, "left": left})

    @rule(number=FEW, began=st.none() | INSTANTS, ended=st.none() | INSTANTS)
    def correct_stop(self, number: int, began: Any, ended: Any) -> None:
        self.correct(Stop, number, False, {"running_at": ended, **({"stopped_at": began} if began else {})})

    @rule(number=FEW, site=st.integers(0, 2), begun=MAYBE_DAYS, ended=MAYBE_DAYS)
    def correct_placement(self, number: int, site: int, begun: Any, ended: Any) -> None:
        fields = {"site": self.sites[site], "to_on": ended, **({"from_on": begun} if begun else {})}
        self.correct(Placement, number, False, fields)

    def correct(self, kind: Any, number: int, old: bool, fields: dict[str, Any]) -> None:
        record = self.some(kind, number)
        if record is None:
            return
        opened = max(1, record.version - int(old))
        now = {name: getattr(record, name) for name in fields}
        answer = self.attempt(correct_record, record=record, version=opened, changes=fields, reason="a slip")
        if answer is not None:
            # An older version is accepted only where it asks for what stands already.
            assert opened == record.version or now == fields

    @rule(
        kind=st.sampled_from([Visit, Fitting, Fitting, Stop, Reading, Placement, Finding]),
        number=FEW,
        with_all=st.booleans(),
    )
    def strike(self, kind: Any, number: int, with_all: bool) -> None:
        record = self.some(kind, number)
        if record is not None:
            self.attempt(strike_out, record=record, reason="never happened", with_all=with_all)

    @rule(day=DAYS, really=st.integers(0, 19))
    def scrap(self, day: Any, really: int) -> None:
        if really == 7:
            self.attempt(save_module, module=self.module, version=None, scrapped_on=day)

    @invariant()
    def everything_holds(self) -> None:
        if hasattr(self, "outer"):
            assert broken_rules() == []

    def derived(self) -> list[Any]:
        of_records = [list(kind.objects.order_by("pk").values_list("pk", "site")) for kind in (Visit, Stop, Reading)]
        knots = [list(each.objects.order_by("pk").values_list()) for each in (ClockPoint, FittingClock)]
        return [*of_records, *knots]


@pytest.mark.django_db
def test_whatever_is_entered_the_records_stay_sound() -> None:
    run_state_machine_as_test(
        Records,
        settings=settings(
            max_examples=14,
            stateful_step_count=25,
            deadline=None,
            derandomize=True,
            database=None,
            phases=[Phase.generate],  # a failing sequence is short enough to read; making it shorter takes minutes
            suppress_health_check=list(HealthCheck),
        ),
    )
