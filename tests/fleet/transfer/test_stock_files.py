"""Stores, the ledger, supply orders and the bench as files: in, out, and the same as by the actions."""

from __future__ import annotations

import io
from pathlib import Path
from typing import Any

import pytest
from django.core.management import call_command

from fleet.actions.book_hours import book_hours
from fleet.actions.change_part_on_bench import change_part_on_bench
from fleet.actions.entries import PartChange
from fleet.actions.finish_job import finish_job
from fleet.actions.issue_part import issue_part
from fleet.actions.move_job import move_job
from fleet.actions.place_module import place_module
from fleet.actions.place_supply_order import OrderedPart, place_supply_order
from fleet.actions.rebuild_balances import wrong_balances
from fleet.actions.receive_stock import receive_stock
from fleet.actions.record_visit import record_visit
from fleet.actions.save_store import save_store
from fleet.actions.scrap_stock import scrap_stock
from fleet.actions.set_capacity import set_capacity
from fleet.actions.strike_out import strike_out
from fleet.actions.take_in_module import take_in_module
from fleet.actions.transfer_stock import transfer_stock
from fleet.models import (
    BenchCapacity,
    BenchHours,
    BenchJob,
    Fitting,
    Site,
    StockBalance,
    StockMove,
    Store,
    SupplyLine,
    SupplyOrder,
    Visit,
)
from fleet.transfer import storing
from fleet.transfer.export_records import write_export
from fleet.transfer.scope import Scope, scope_of
from tests import factories as make
from tests.fleet.invariants import broken_rules
from tests.fleet.invariants_stock import broken_stock_rules
from tests.fleet.transfer.files import bring_in, look, stocked, text
from tests.fleet.transfer.test_export import empty_book, exported

pytestmark = pytest.mark.django_db


def balances() -> list[Any]:
    rows = StockBalance.objects.exclude(on_hand=0).order_by("store__code", "part__code", "condition")
    return list(rows.values_list("store__code", "part__code", "condition", "on_hand"))


ON_HAND = [
    ("SHELF", "N-1", "new", 6),
    ("SHELF", "N-1", "used", 1),
    ("SHELF", "S-1", "new", 1),
    ("VAN-A", "N-1", "new", 1),
]


def sound() -> bool:
    return broken_rules() == [] and broken_stock_rules() == [] and wrong_balances() == {}


def problems(files: Any, **more: Any) -> list[tuple[str, int, str, str]]:
    found = look(files, **more).problems.as_dicts()
    return [(each["file"], each["row"], each["column"], each["message"]) for each in found]


def changed(name: str, row: int, column: str, value: str) -> dict[str, str | bytes]:
    lines = [line.split(",") for line in text(name).strip().split("\n")]
    lines[row - 1][lines[0].index(column)] = value
    return stocked(**{name: "\n".join(",".join(line) for line in lines) + "\n"})


def test_it_all_comes_in(tmp_path: Path) -> None:
    work = bring_in(tmp_path, stocked())
    assert work.state == "done", work.result
    assert balances() == ON_HAND
    assert list(SupplyLine.objects.open().values_list("order__code", "part__code", "due")) == [("PO-2", "N-1", 5)]
    job = BenchJob.objects.get()
    assert (job.stage, job.depot.code, sum(row.hours for row in job.hours.all())) == ("finished", "SHED", 3.5)
    assert list(BenchCapacity.objects.values_list("week", "hours")) == [
        (make.on("2024-06-03"), 40),
        (make.on("2024-06-10"), 32),
    ]
    assert StockBalance.objects.get(store__code="SHELF", part__code="N-1", condition="new").counted_on == make.on(
        "2024-07-01"
    )
    assert sound()


def test_what_was_changed_on_the_bench_makes_no_visit(tmp_path: Path) -> None:
    bring_in(tmp_path, stocked())
    screw = Fitting.objects.get(code="F-5")
    assert (screw.job.code, screw.fitted_visit) == ("J-1", None)
    assert not Visit.objects.filter(happened_on=make.on("2024-06-03")).exists()


def test_again_nothing_is_added_and_nothing_differs(tmp_path: Path) -> None:
    bring_in(tmp_path, stocked())
    work = bring_in(tmp_path, stocked())
    assert work.state == "done", work.result
    assert {each["added"] for each in work.result["files"] if each["file"] != "lives.csv"} == {0}
    assert balances() == ON_HAND


@pytest.mark.django_db(transaction=True)
@pytest.mark.parametrize("form", ["again.zip", "again.xlsx"])
def test_an_export_gives_an_empty_book_the_same_on_hand(form: str, tmp_path: Path) -> None:
    bring_in(tmp_path, stocked())
    strike_out(by=make.make_manager(code="MAN"), record=StockMove.objects.get(code="SM-9"), reason="found again")
    before, held = exported(tmp_path), balances()
    assert held[0] == ("SHELF", "N-1", "new", 7)
    write_export(tmp_path / form, Scope())
    empty_book()
    call_command("import_records", str(tmp_path / form), stdout=io.StringIO())
    assert balances() == held
    assert exported(tmp_path, "second.zip") == before
    assert sound()


def test_an_update_overwrites_and_the_balances_follow(tmp_path: Path) -> None:
    bring_in(tmp_path, stocked())
    files = changed("moves", 5, "quantity", "-3")
    files["supply"] = text("supply").replace("Brandt", "Kolb").replace("PO-2,N-1,5", "PO-2,N-1,8")
    found = problems(files)
    assert {each[:3] for each in found} == {
        ("supply.csv", 2, "supplier"), ("supply.csv", 3, "supplier"), ("supply.csv", 4, "quantity"),
        ("supply.csv", 4, "supplier"), ("moves.csv", 5, "quantity"),
    }  # fmt: skip
    work = bring_in(tmp_path, files, update=True)
    assert work.state == "done", work.result
    assert ("VAN-A", "N-1", "new", 2) in balances()
    assert set(SupplyOrder.objects.values_list("supplier", "version")) == {("Kolb", 2)}
    assert SupplyOrder.history.count() == 4
    assert sound()


WRONG = [
    ("stores", 2, "site", "NOWHERE", "Add the site"),
    ("stores", 3, "may_go_below_zero", "maybe", "neither yes nor no"),
    ("supply", 2, "quantity", "0", "out of range"),
    ("supply", 3, "ordered_on", "2024-02-02", "differs from an earlier line of order PO-1"),
    ("supply", 2, "due_on", "2024-01-20", "lies before the day it was ordered"),
    ("supply", 2, "quantity", "9", "makes 10 received of 9 ordered"),
    ("bench", 2, "module", "K-99", "Add it to modules.csv"),
    ("bench", 2, "depot", "WEIR", "outside the module's stay"),
    ("bench", 2, "received_on", "2024-05-30", "outside the module's stay"),
    ("bench", 2, "finished_on", "2024-07-02", "outside the module's stay"),
    ("bench", 2, "outcome", "", "is missing: the job is finished"),
    ("bench", 2, "stage", "waiting", "do not agree"),
    ("bench", 2, "started_on", "2024-05-31", "lies before the day it was received"),
    ("bench", 2, "waits_for", "N-2", "yet the stage is finished"),
    ("bench", 2, "waits_for", "N-9", "Add it to parts.csv"),
    ("hours", 2, "job", "J-9", "Add the job to bench.csv"),
    ("hours", 2, "day", "2024-07-09", "lies after the day the job was finished"),
    ("hours", 2, "hours", "25", "out of range"),
    ("hours", 3, "day", "2024-06-03", "repeats row 2"),
    ("capacity", 2, "week", "June", "is no week"),
    ("capacity", 2, "week", "2024-W60", "does not have"),
    ("capacity", 2, "week", "2024-06-11", "repeats row"),
    ("capacity", 2, "week", "9999-12-31", "more than ten years ahead"),
    ("supply", 2, "due_on", "9999-12-31", "more than ten years ahead"),
    ("moves", 2, "quantity", "-6", "more than 0"),
    ("moves", 6, "quantity", "1", "less than 0"),
    ("moves", 5, "other_store", "", "a transfer has two ends"),
    ("moves", 5, "other_store", "SHELF", "is the store itself"),
    ("moves", 2, "other_store", "VAN-A", "yet this is a receipt"),
    ("moves", 4, "order", "PO-2", "has no line of this part"),
    ("moves", 3, "quantity", "5", "makes 11 received of 10 ordered"),
    ("moves", 2, "happened_on", "2024-01-18", "lies before the day it was ordered"),
    ("moves", 7, "quantity", "-3", "leaves -1 at this store"),
    ("moves", 6, "visit", "V-9", "Add the visit"),
    ("moves", 7, "happened_on", "2024-07-09", "lies after the day the job was finished"),
    ("moves", 8, "kind", "theft", "is not known here"),
    ("moves", 2, "happened_on", "2200-01-01", "lies in the future"),
]


@pytest.mark.parametrize(("name", "row", "column", "value", "words"), WRONG)
def test_a_wrong_cell_is_named_and_nothing_is_stored(name: str, row: int, column: str, value: str, words: str) -> None:
    found = problems(changed(name, row, column, value))
    assert any(words in message for _, _, _, message in found), found
    assert not Store.objects.exists()


def test_the_part_that_a_job_waits_for_comes_in_goes_out_and_stays_where_a_file_says_nothing(tmp_path: Path) -> None:
    home = "K-10,WEIR,B2,2024-01-10,"
    placements = text("placements").replace(home, f"{home}2024-07-01\nK-10,SHED,,2024-07-01,")
    bench = "job,module,received_on,stage,waits_for\nJ-7,K-10,2024-07-02,waiting for parts,N-2\n"
    files = stocked(placements=placements, bench=bench, fittings=text("fittings"), hours=None, moves=None)
    assert bring_in(tmp_path, files).state == "done"
    job = BenchJob.objects.get()
    assert job.waits_for.code == "N-2"
    assert [(row["job"], row["waits_for"]) for row in exported(tmp_path)["bench"]] == [("J-7", "N-2")]
    untold = "job,module,received_on,stage,note\nJ-7,K-10,2024-07-02,waiting for parts,asked the supplier\n"
    assert bring_in(tmp_path, {"bench": untold}, update=True).state == "done"
    job.refresh_from_db()
    assert (job.note, job.waits_for.code) == ("asked the supplier", "N-2")
    assert bring_in(tmp_path, {"bench": bench.replace("N-2", "N-1")}, update=True).state == "done"
    job.refresh_from_db()
    assert job.waits_for.code == "N-1"


def test_nobody_works_more_than_a_day() -> None:
    bench = text("bench").replace("2024-06-28", "2024-06-10") + "J-2,K-9,SHED,,2024-06-10,,,2024-06-28,ready,,\n"
    hours = text("hours") + "J-1,MAX,2024-06-10,13\nJ-2,MAX,2024-06-10,12\n"
    [(file, row, column, message)] = problems(stocked(bench=bench, hours=hours))
    assert (file, row, column) == ("hours.csv", 5, "hours")
    assert message == "makes 25 hours of this person on that day. Correct the hours."


def test_jobs_of_a_module_do_not_overlap() -> None:
    bench = text("bench") + "J-2,K-9,SHED,,2024-06-10,,,2024-06-30,ready,,\n"
    [(file, row, _, message)] = problems(stocked(bench=bench))
    assert (file, row) == ("bench.csv", 3)
    assert "overlaps another job of this module" in message


def test_a_stay_is_not_cut_below_its_job(tmp_path: Path) -> None:
    bring_in(tmp_path, stocked())
    files = {"placements": text("placements").replace("2024-06-01,2024-07-01", "2024-06-01,2024-06-20")}
    [(file, _, column, message)] = problems(files, update=True)
    assert (file, column) == ("placements.csv", "to_on")
    assert "leaves bench job J-1 without its stay" in message


def test_a_move_at_the_last_moment_makes_the_import_look_again(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Somebody issues the last ones between the check and the store: the files, checked once more, are refused."""
    bring_in(tmp_path, stocked())
    original, boss = storing.Store.run, make.make_manager()

    def run_after_issue(store: Any) -> None:
        if not StockMove.objects.filter(reason="for the tank").exists():
            shelf, part = Store.objects.get(code="SHELF"), Fitting.objects.get(code="F-1").part
            issue_part(by=boss, store=shelf, part=part, quantity=6, reason="for the tank")
        original(store)

    monkeypatch.setattr(storing.Store, "run", run_after_issue)
    more = "move,store,part,happened_on,quantity,kind,reason\nSM-20,SHELF,N-1,2024-08-01,-2,scrap,rust\n"
    work = bring_in(tmp_path, {"moves": more})
    assert "leaves -2 at this store" in str(work.result["errors"])
    assert not StockMove.objects.filter(code="SM-20").exists()
    assert sound()


# --- the same by either path

OWN = {
    "id", "code", "code_order", "version", "entered_at", "entered_by_id", "order_id", "line_id", "job_id", "visit_id",
    "module_id", "folded", "store_id", "other_store_id", "fitted_visit_id", "removed_visit_id",
}  # fmt: skip


def plain(record: Any) -> dict[str, Any]:
    row = {each.attname: getattr(record, each.attname) for each in record._meta.concrete_fields}
    kept = {name: value for name, value in row.items() if name not in OWN}
    if isinstance(record, StockMove):
        kept["store"], kept["other"] = record.store.name, record.other_store and record.other_store.name
        kept["line"] = record.line and (record.line.order.ordered_on, record.line.part_id)
        kept["of"] = bool(record.visit_id), bool(record.job_id)
    return kept


def test_the_same_rows_by_files_and_by_actions(tmp_path: Path) -> None:
    world, depot = make.Carriage(), make.make_depot(code="YARD")
    twin = make.make_module(type=world.type, site=world.site)
    who = make.make_bench(depot, code="GRETA")
    boss = make.make_manager()

    shelf = save_store(by=boss, code="A-SHELF", name="shelf", site=depot)
    van = save_store(by=boss, code="A-VAN", name="van", person=world.crew, may_go_below_zero=True)
    order = place_supply_order(
        by=boss, code="A-1", supplier="Brandt", ordered_on=make.on("2024-02-01"),
        lines=[OrderedPart(world.n2, 10, due_on=make.on("2024-02-20"), unit_cost=12)],  # type: ignore[arg-type]
    )  # fmt: skip
    common: dict[str, Any] = {"by": boss, "store": shelf}
    receive_stock(**common, line=order.lines.get(), quantity=6, happened_on=make.on("2024-02-18"))
    transfer_stock(**common, other_store=van, part=world.n2, quantity=2, happened_on=make.on("2024-02-19"))
    visit = record_visit(
        by=world.crew, module=world.module, happened_at=make.at("2024-03-01"), left="to bench",
        known_on=make.on("2024-03-01"), changes=[PartChange(position=world.nut, part=world.n1)],
    )  # fmt: skip
    issue_part(by=world.crew, store=van, part=world.n1, visit=visit)
    place_module(by=boss, module=world.module, site=depot, from_on=make.on("2024-03-03"))
    job = take_in_module(by=who, module=world.module, depot=depot, received_on=make.on("2024-03-03"), reason="bowed")
    move_job(by=who, job=job, stage="on the bench", day=make.on("2024-03-04"))
    entry = PartChange(position=world.nut, reason="planned", part=world.n2)
    change_part_on_bench(by=who, job=job, entry=entry, day=make.on("2024-03-05"), store=shelf)
    book_hours(by=who, job=job, hours=2.5, day=make.on("2024-03-05"))
    finish_job(by=who, job=job, outcome="ready", finished_on=make.on("2024-03-09"), note="all right")
    scrap_stock(**common, part=world.n2, quantity=1, reason="dropped", happened_on=make.on("2024-03-10"))
    set_capacity(by=boss, first_week=make.on("2024-03-04"), hours=40)

    m, n1, n2 = twin.code, world.n1.code, world.n2.code
    files = {
        "stores": f"store,name,site,person,may_go_below_zero\nB-SHELF,shelf,YARD,,\nB-VAN,van,,{world.crew.code},yes\n",
        "supply": "order,part,quantity,ordered_on,due_on,supplier,unit_cost\n"
        f"B-1,{n2},10,2024-02-01,2024-02-20,Brandt,12\n",
        "placements": f"module,site,bay,from_on,to_on\n{m},{world.site.code},,2020-01-06,2024-03-03\n"
        f"{m},YARD,,2024-03-03,\n",
        "visits": f"visit,module,happened_at,crew,left\nT-1,{m},2024-03-01T09:00,{world.crew.code},to bench\n",
        "bench": "job,module,reason,received_on,started_on,finished_on,outcome,note\n"
        f"T-J,{m},bowed,2024-03-03,2024-03-04,2024-03-09,ready,all right\n",
        "hours": "job,person,day,hours\nT-J,GRETA,2024-03-05,2.5\n",
        "fittings": "fitting,module,position,part,fitted_on,fitted_visit,removed_on,reason,job\n"
        f"T-F1,{m},NUT,{n1},2024-03-01,T-1,2024-03-05,planned,T-J\nT-F2,{m},NUT,{n2},2024-03-05,,,,T-J\n",
        "moves": "move,store,part,happened_on,quantity,kind,other_store,visit,job,order,reason\n"
        f"T-1,B-SHELF,{n2},2024-02-18,6,receipt,,,,B-1,\nT-2,B-SHELF,{n2},2024-02-19,-2,transfer,B-VAN,,,,\n"
        f"T-3,B-VAN,{n1},2024-03-01,-1,issue,,T-1,,,\nT-4,B-SHELF,{n2},2024-03-05,-1,issue,,,T-J,,\n"
        f"T-5,B-SHELF,{n2},2024-03-10,-1,scrap,,,,,dropped\n",
    }
    work = bring_in(tmp_path, files, update=True)
    assert work.state == "done", work.result

    def pair(model: Any, mine: Any, theirs: Any, *order_by: str) -> None:
        by_actions = [plain(row) for row in model.objects.filter(**mine).order_by(*order_by)]
        by_files = [plain(row) for row in model.objects.filter(**theirs).order_by(*order_by)]
        assert by_actions, model
        assert by_files == by_actions, model

    pair(Store, {"code__startswith": "A-"}, {"code__startswith": "B-"}, "code")
    pair(SupplyOrder, {"code": "A-1"}, {"code": "B-1"}, "code")
    pair(SupplyLine, {"order__code": "A-1"}, {"order__code": "B-1"}, "pk")
    pair(BenchJob, {"module": world.module}, {"module": twin}, "pk")
    pair(BenchHours, {"job__module": world.module}, {"job__module": twin}, "pk")
    pair(StockMove, {"store__code__startswith": "A-"}, {"store__code__startswith": "B-"}, "happened_on", "pk")
    fitted = {"part_id", "fitted_on", "removed_on", "reason"}
    told = [
        [
            {name: value for name, value in plain(row).items() if name in fitted}
            | {"job": bool(row.job_id), "visit": bool(row.fitted_visit_id)}
            for row in Fitting.objects.filter(module=each).order_by("fitted_on")
        ]
        for each in (world.module, twin)
    ]  # fmt: skip
    assert told[0] == told[1]
    on_hand = [
        list(StockBalance.objects.filter(store__code__startswith=start).order_by("store__code", "part").values_list(
            "part", "condition", "on_hand", "counted_on")) for start in ("A-", "B-")
    ]  # fmt: skip
    assert on_hand[0] == on_hand[1]
    for model in (Store, SupplyOrder, SupplyLine, BenchJob, BenchHours, StockMove):
        for record in model.objects.all():
            newest = record.history.first()
            names = [each.attname for each in model._meta.concrete_fields if hasattr(newest, each.attname)]
            assert [getattr(newest, name) for name in names] == [getattr(record, name) for name in names]


# --- who may take out what


def test_what_each_role_takes_out(tmp_path: Path) -> None:
    bring_in(tmp_path, stocked())
    weir, shed = Site.objects.get(code="WEIR"), Site.objects.get(code="SHED")
    contact = exported(tmp_path, "contact.zip", scope_of(make.make_contact(weir)))
    for name in ("stores", "moves", "supply", "bench", "hours", "capacity"):
        assert contact[name] == [], name
    bench = exported(tmp_path, "bench.zip", scope_of(make.make_bench(shed)))
    assert [row["job"] for row in bench["bench"]] == ["J-1"]
    assert bench["supply"] == []
    assert {row["store"] for row in bench["stores"]} == {"SHELF", "VAN-A"}
    assert {row["move"] for row in bench["moves"]} == {f"SM-{n}" for n in (1, 2, 3, 4, 6, 7, 8, 9)}
    whole = exported(tmp_path, "all.zip", scope_of(make.make_planner()))
    assert len(whole["moves"]) == 9
    assert whole["supply"][0]["unit_cost"] == "11.50"


@pytest.mark.django_db(transaction=True)
def test_what_one_site_takes_out_comes_in_elsewhere(tmp_path: Path) -> None:
    bring_in(tmp_path, stocked())
    write_export(tmp_path / "shed.zip", scope_of(None, Site.objects.get(code="SHED")))
    empty_book()
    call_command("import_records", str(tmp_path / "shed.zip"), stdout=io.StringIO())
    assert [row for row in balances() if row[0] == "SHELF"] == ON_HAND[:3]
    assert BenchJob.objects.get().hours.count() == 2
    assert sound()
