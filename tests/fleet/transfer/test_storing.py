"""While files are stored, others go on working: conflicts are found at the last moment, and nothing half stays."""

from __future__ import annotations

import datetime as dt
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from fleet.actions.fit_part import fit_part
from fleet.actions.remove_part import remove_part
from fleet.models import Fitting, Module, Part, Placement, Position, Visit, Work
from fleet.transfer import import_records, storing
from fleet.transfer.holding import sweep_leftovers
from fleet.transfer.reserve import reserve
from fleet.transfer.storing import Store
from fleet.transfer.writing_sql import NOT_FINISHED
from fleet.work.enqueue import ask_to_cancel
from tests.fleet.invariants import broken_rules
from tests.fleet.transfer.files import bring_in, fleet

pytestmark = pytest.mark.django_db(transaction=True)
SCREW = "fitting,module,position,part,fitted_on\nF-9,K-10,S1,S-1,2024-02-01\n"


def nothing_waits() -> bool:
    return not any(
        model.objects.filter(struck_out=NOT_FINISHED).exists() or model.history.filter(struck_out=NOT_FINISHED).exists()
        for model in (Fitting, Visit)
    )


def meanwhile(monkeypatch: pytest.MonkeyPatch, does: Callable[[], Any], times: int = 1) -> list[int]:
    """Somebody does something between the check and the store, so many times."""
    calls: list[int] = []
    original = Store.reserve_numbers

    def interrupted(self: Store) -> None:
        if len(calls) < times:
            does()
        calls.append(1)
        original(self)

    monkeypatch.setattr(Store, "reserve_numbers", interrupted)
    return calls


def logs(code: str, position: str = "S1", part: str = "S-1", module: str = "K-10", day: int = 5) -> Fitting:
    of = Module.objects.get(code=module)
    return fit_part(
        by=None,
        module=of,
        position=Position.objects.get(code=position),
        part=Part.objects.get(code=part),
        fitted_on=dt.date(2024, 3, day),
        code=code,
    )


def test_a_clash_with_an_entry_of_the_last_moment_stores_nothing(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    bring_in(tmp_path)
    calls = meanwhile(monkeypatch, lambda: logs("F-8"))

    work = bring_in(tmp_path, {"fittings": SCREW})

    assert work.state == "failed"
    assert "overlaps another part" in work.result["errors"][0]["message"]
    assert len(calls) == 1  # the second check found it
    assert not Fitting.objects.filter(code="F-9").exists()
    assert not Fitting.history.filter(code="F-9").exists()
    assert nothing_waits()
    assert broken_rules() == []


def test_a_clash_that_no_constraint_of_the_embedded_database_sees(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    bring_in(tmp_path)

    def in_and_out() -> None:
        remove_part(by=None, fitting=logs("F-8"), removed_on=dt.date(2024, 3, 20), reason="planned")

    meanwhile(monkeypatch, in_and_out)
    closed = SCREW.replace("fitted_on", "fitted_on,removed_on,reason").replace("02-01", "02-01,2024-04-01,planned")
    work = bring_in(tmp_path, {"fittings": closed})

    assert work.state == "failed"
    assert "overlaps another part" in work.result["errors"][0]["message"]
    assert nothing_waits()
    assert broken_rules() == []


def test_the_same_code_given_at_the_last_moment(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    bring_in(tmp_path)
    meanwhile(monkeypatch, lambda: logs("F-9", module="K-9"))

    work = bring_in(tmp_path, {"fittings": SCREW})

    assert work.state == "failed"
    assert "differs from the book" in work.result["errors"][0]["message"]
    assert Fitting.objects.get(code="F-9").module.code == "K-9"
    assert nothing_waits()


def test_an_entry_that_does_not_clash_is_worked_around(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    bring_in(tmp_path)
    calls = meanwhile(monkeypatch, lambda: logs("F-8", module="K-9"))

    work = bring_in(tmp_path, {"fittings": SCREW})

    assert work.state == "done", work.result
    assert len(calls) == 1  # another module: no second check was needed
    assert {"F-8", "F-9"} <= set(Fitting.objects.values_list("code", flat=True))


def test_a_book_that_never_rests(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    bring_in(tmp_path)
    days = iter(range(1, 30))

    def another_visit() -> None:
        day = next(days)
        at = dt.datetime(2024, 4, day, 9, tzinfo=dt.UTC)
        module = Module.objects.get(code="K-10")
        Visit.objects.create(code=f"X-{day}", module=module, happened_at=at, happened_on=at.date(), known_on=at.date())

    meanwhile(monkeypatch, another_visit, times=99)
    work = bring_in(tmp_path, {"fittings": SCREW})

    assert work.state == "failed"
    assert "Import them in a quiet hour" in work.result["errors"][0]["message"]
    assert nothing_waits()


def test_cancelled_while_it_stores(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    original = storing.Job.step

    def cancel_when_storing(self: Any, rows: int, message: str) -> None:
        if message == "Storing fittings.csv":
            ask_to_cancel(Work.objects.get(state="running"))
            self.progress._next_write = 0.0
        original(self, rows, message)

    monkeypatch.setattr(import_records.Job, "step", cancel_when_storing)
    monkeypatch.setattr(Store, "reserve_numbers", cancelled_before(Store.reserve_numbers))
    work = bring_in(tmp_path)

    assert work.state == "cancelled"
    for model in (Module, Placement, Visit, Fitting):
        assert not model.objects.exists()
        assert not model.history.exists()


def cancelled_before(original: Callable[[Any], None]) -> Callable[[Any], None]:
    """For the engine that stores in one transaction: asked to cancel just before."""

    def then(self: Store) -> None:
        original(self)
        if not storing.waits(self.job.kinds[-1]):
            ask_to_cancel(Work.objects.get(state="running"))
            self.job.progress._next_write = 0.0

    return then


def test_an_attempt_that_was_taken_over_stores_nothing(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def taken_over() -> None:
        Work.objects.filter(state="running").update(attempt=7)

    meanwhile(monkeypatch, taken_over)
    bring_in(tmp_path)

    assert not Module.objects.exists()
    assert not Fitting.objects.exists()


def test_leftovers_of_a_given_up_import_are_swept(tmp_path: Path) -> None:
    bring_in(tmp_path)
    base = reserve("fleet_visit", 10)
    module = Module.objects.get(code="K-9")
    at = dt.datetime(2024, 4, 1, tzinfo=dt.UTC)
    fields = {"module": module, "happened_at": at, "happened_on": at.date(), "known_on": at.date()}
    Visit.objects.create(pk=base + 1, code="LEFT", struck_out=NOT_FINISHED, **fields)
    kept = Visit.objects.create(pk=base + 2, code="KEPT", struck_out="typing", **fields)
    work = Work.objects.create(
        kind="import_records", state="failed", result={"holding": {"fleet_visit": [base, base + 10]}}
    )

    sweep_leftovers()

    assert not Visit.objects.filter(code="LEFT").exists()
    assert not Visit.history.filter(code="LEFT").exists()
    assert Visit.objects.filter(pk=kept.pk).exists()
    work.refresh_from_db()
    assert work.result == {}


def test_reserved_numbers_are_nobody_elses(tmp_path: Path) -> None:
    bring_in(tmp_path, fleet(fittings=None, findings=None, stops=None, readings=None))
    first = reserve("fleet_fitting", 100)
    entered = logs("F-1")
    second = reserve("fleet_fitting", 100)

    assert entered.pk > first + 100
    assert second >= entered.pk
