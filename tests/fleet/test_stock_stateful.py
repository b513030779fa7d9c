"""Random sequences of moves, deliveries, jobs and strike-outs; after each, stores and bench are sound.

Beside the book runs a plain count of what should lie where; the two must agree whatever was refused.
"""

from __future__ import annotations

import datetime as dt
import uuid
from collections import Counter
from collections.abc import Callable
from typing import Any

import pytest
from django.db import transaction
from hypothesis import HealthCheck, Phase, settings
from hypothesis import strategies as st
from hypothesis.stateful import RuleBasedStateMachine, initialize, invariant, rule, run_state_machine_as_test

from fleet.actions.book_hours import book_hours
from fleet.actions.change_part_on_bench import change_part_on_bench
from fleet.actions.change_supply_line import cancel_supply_line, change_supply_line
from fleet.actions.count_stock import count_stock
from fleet.actions.entries import PartChange
from fleet.actions.errors import Collided, RecordError
from fleet.actions.finish_job import finish_job
from fleet.actions.issue_part import issue_part
from fleet.actions.move_job import move_job
from fleet.actions.place_module import place_module
from fleet.actions.place_supply_order import OrderedPart, place_supply_order
from fleet.actions.receive_stock import receive_stock
from fleet.actions.record_visit import record_visit
from fleet.actions.scrap_stock import scrap_stock
from fleet.actions.strike_out import strike_out
from fleet.actions.take_in_module import take_in_module
from fleet.actions.transfer_stock import transfer_stock
from fleet.models import BenchHours, BenchJob, Outcome, Stage, StockMove, SupplyLine
from tests.factories import Carriage, make_depot, make_store
from tests.fleet.invariants import broken_rules
from tests.fleet.invariants_stock import broken_stock_rules, sums

FIRST = dt.date(2024, 1, 1)
DAYS = st.integers(0, 30).map(lambda number: FIRST + dt.timedelta(days=number))
COUNTS = st.integers(-1, 6)
FEW = st.integers(0, 4)
TWO = st.integers(0, 1)


class Stock(RuleBasedStateMachine):
    """Two stores (one may go below zero), two nuts, one module, one depot."""

    @initialize()
    def begin(self) -> None:
        self.outer = transaction.atomic()
        self.outer.__enter__()
        self.weir, self.depot = Carriage(), make_depot()
        self.boss = self.weir.manager
        self.stores = [make_store(site=self.depot), make_store(person=self.weir.crew, may_go_below_zero=True)]
        self.parts = [self.weir.n1, self.weir.n2]
        self.weir.fit(self.weir.n1, "2023-06-01")
        self.expected: Counter[tuple[int, int, str]] = Counter()

    def teardown(self) -> None:
        if hasattr(self, "outer"):
            transaction.set_rollback(True)
            self.outer.__exit__(None, None, None)

    def attempt(self, act: Callable[..., Any], **fields: Any) -> Any:
        """A refusal changes nothing; `Collided` would mean that only the database stopped it."""
        try:
            with transaction.atomic():
                return act(by=self.boss, **fields)
        except Collided:
            raise
        except RecordError:
            return None

    def some(self, kind: Any, number: int) -> Any:
        rows = list(kind.objects.order_by("-pk")[:5])
        return rows[number % len(rows)] if rows else None

    def note(self, move: StockMove | None, sign: int = 1) -> None:
        if move is None:
            return
        self.expected[move.store_id, move.part_id, move.condition] += sign * move.quantity
        if move.other_store_id is not None:
            self.expected[move.other_store_id, move.part_id, move.condition] -= sign * move.quantity

    @rule(part=TWO, count=COUNTS, day=DAYS)
    def order(self, part: int, count: int, day: Any) -> None:
        self.attempt(place_supply_order, lines=[OrderedPart(self.parts[part], count)], ordered_on=day)

    @rule(store=TWO, count=COUNTS, number=FEW, day=DAYS, twice=st.booleans())
    def receive(self, store: int, count: int, number: int, day: Any, twice: bool) -> None:
        line, key = self.some(SupplyLine, number), uuid.uuid4()
        said = {"line": line} if line is not None else {"part": self.parts[0]}
        for _ in range(1 + twice):
            move = self.attempt(
                receive_stock, store=self.stores[store], quantity=count, happened_on=day, entry_key=key, **said
            )
        self.note(move)

    @rule(store=TWO, part=TWO, count=COUNTS, for_job=st.booleans(), number=FEW, day=DAYS)
    def issue(self, store: int, part: int, count: int, for_job: bool, number: int, day: Any) -> None:
        job = self.some(BenchJob, number) if for_job else None
        fields = {"job": job} if job is not None else {"reason": "for the tank"}
        self.note(self.attempt(
            issue_part, store=self.stores[store], part=self.parts[part], quantity=count, happened_on=day, **fields
        ))  # fmt: skip

    @rule(store=TWO, other=TWO, part=TWO, count=COUNTS)
    def transfer(self, store: int, other: int, part: int, count: int) -> None:
        ends = {"store": self.stores[store], "other_store": self.stores[other]}
        self.note(self.attempt(transfer_stock, part=self.parts[part], quantity=count, **ends))

    @rule(store=TWO, part=TWO, count=COUNTS, scrap=st.booleans())
    def count_or_scrap(self, store: int, part: int, count: int, scrap: bool) -> None:
        where = {"store": self.stores[store], "part": self.parts[part], "reason": "seen"}
        move = self.attempt(scrap_stock, quantity=count, **where) if scrap else self.attempt(
            count_stock, counted=count, **where)  # fmt: skip
        self.note(move)
        if move is not None and not scrap:
            assert sums()[move.store_id, move.part_id, "new"] == count

    @rule(number=FEW)
    def strike_move(self, number: int) -> None:
        move = self.some(StockMove, number)
        if move is not None and self.attempt(strike_out, record=move, reason="never happened") is not None:
            self.note(move, -1)

    @rule(number=FEW, quantity=COUNTS, off=st.booleans())
    def change_line(self, number: int, quantity: int, off: bool) -> None:
        line = self.some(SupplyLine, number)
        if line is None:
            return
        if off:
            self.attempt(cancel_supply_line, line=line, reason="not needed")
        else:
            self.attempt(change_supply_line, line=line, version=line.version, quantity=quantity)

    @rule(day=DAYS, sent=st.booleans())
    def take_in(self, day: Any, sent: bool) -> None:
        if sent:
            at = dt.datetime.combine(day, dt.time(9), dt.UTC)
            self.attempt(record_visit, module=self.weir.module, happened_at=at, left="to bench")
        self.attempt(take_in_module, module=self.weir.module, depot=self.depot, received_on=day)

    @rule(number=FEW, stage=st.sampled_from(Stage.values), day=DAYS)
    def move(self, number: int, stage: str, day: Any) -> None:
        job = self.some(BenchJob, number)
        if job is not None:
            self.attempt(move_job, job=job, stage=stage, day=day)

    @rule(number=FEW, hours=st.sampled_from([0.5, 3.0, 12.0, 25.0]), day=DAYS)
    def work(self, number: int, hours: float, day: Any) -> None:
        job = self.some(BenchJob, number)
        if job is not None:
            self.attempt(book_hours, job=job, hours=hours, day=day)

    @rule(number=FEW, day=DAYS, store=TWO, part=TWO)
    def change_part(self, number: int, day: Any, store: int, part: int) -> None:
        job = self.some(BenchJob, number)
        if job is None:
            return
        before = StockMove.objects.count()
        entry = PartChange(position=self.weir.nut, reason="planned", part=self.parts[part])
        done = self.attempt(change_part_on_bench, job=job, entry=entry, day=day, store=self.stores[store])
        assert StockMove.objects.count() == before + (done is not None)
        if done is not None:
            self.note(StockMove.objects.latest("pk"))

    @rule(number=FEW, outcome=st.sampled_from([Outcome.READY, Outcome.WITHDRAWN]), day=DAYS)
    def finish(self, number: int, outcome: str, day: Any) -> None:
        job = self.some(BenchJob, number)
        if job is not None:
            self.attempt(finish_job, job=job, outcome=outcome, finished_on=day)

    @rule(day=DAYS)
    def place(self, day: Any) -> None:
        self.attempt(place_module, module=self.weir.module, site=self.weir.site, from_on=day, same_day=True)

    @rule(kind=st.sampled_from([BenchJob, BenchHours]), number=FEW)
    def strike_bench(self, kind: Any, number: int) -> None:
        record = self.some(kind, number)
        if record is not None:
            self.attempt(strike_out, record=record, reason="never happened")

    @invariant()
    def everything_holds(self) -> None:
        if hasattr(self, "outer"):
            assert broken_stock_rules() == []
            assert broken_rules() == []
            held = {key: count for key, count in sums().items() if count}
            assert held == {key: count for key, count in self.expected.items() if count}


@pytest.mark.django_db
def test_whatever_is_moved_stores_and_bench_stay_sound() -> None:
    run_state_machine_as_test(
        Stock,
        settings=settings(
            max_examples=12,
            stateful_step_count=30,
            deadline=None,
            derandomize=True,
            database=None,
            phases=[Phase.generate],
            suppress_health_check=list(HealthCheck),
        ),
    )
