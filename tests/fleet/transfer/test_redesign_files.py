"""Redesigns, what they replace and their rollout plans as files: in, out, and the same as by the actions."""

from __future__ import annotations

import io
from pathlib import Path
from typing import Any

import pytest
from django.core.management import call_command

from fleet.actions.errors import RecordError
from fleet.actions.plan_rollout import drop_step, move_step, plan_rollout
from fleet.actions.save_redesign import PartReplaced, save_redesign
from fleet.models import Module, Part, Redesign, RedesignChange, RolloutStep, Site
from fleet.transfer import storing
from fleet.transfer.export_records import write_export
from fleet.transfer.scope import Scope, scope_of
from tests import factories as make
from tests.fleet.invariants import broken_rules
from tests.fleet.transfer.files import REDESIGNED, bring_in, look, redesigned
from tests.fleet.transfer.test_export import empty_book, exported

pytestmark = pytest.mark.django_db
KINDS = ("redesigns", "replacements", "rollout")


def replaced() -> list[tuple[str, str, list[str]]]:
    return [
        (line.redesign.code, line.new_part.code, sorted(part.code for part in line.replaces.all()))
        for line in RedesignChange.objects.order_by("redesign__code", "new_part__code")
    ]


def steps(redesign: str = "LIP") -> list[tuple[str, int, str | None]]:
    rows = RolloutStep.objects.standing().filter(redesign__code=redesign).order_by("order")
    return [(row.module.code, row.order, row.planned_on and row.planned_on.isoformat()) for row in rows]


def changed(name: str, row: int, column: str, value: str) -> dict[str, str | bytes]:
    lines = [line.split(",") for line in REDESIGNED[name].strip().split("\n")]
    lines[row - 1][lines[0].index(column)] = value
    return redesigned(**{name: "\n".join(",".join(line) for line in lines) + "\n"})


def more(name: str, *rows: str) -> dict[str, str | bytes]:
    return redesigned(**{name: REDESIGNED[name].strip() + "\n" + "\n".join(rows) + "\n"})


def problems(files: Any, **choices: Any) -> list[tuple[str, int, str, str]]:
    found = look(files, **choices).problems.as_dicts()
    return [(each["file"], each["row"], each["column"], each["message"]) for each in found]


def test_it_all_comes_in(tmp_path: Path) -> None:
    work = bring_in(tmp_path, redesigned())
    assert work.state == "done", work.result
    lip, screw = Redesign.objects.order_by("code_order")
    assert (lip.name, lip.hope, str(lip.cost_a_module), lip.bench_hours_a_failure) == (
        "Nut with a lip",
        1.4,
        "55.50",
        0.25,
    )
    assert (screw.hope, screw.cost_a_module, screw.visits_a_failure, screw.stop_days_a_failure) == (1.5, None, 1, 1)
    assert replaced() == [("LIP", "G-2", ["G-1"]), ("LIP", "N-2", ["N-0", "N-1"]), ("SCREW-2", "S-2", ["S-1"])]
    assert steps() == [("K-10", 1, "2024-03-01"), ("K-9", 2, "2024-03-08")]
    assert broken_rules() == []


def test_a_preview_says_what_would_be_added() -> None:
    found = {each["file"]: each["added"] for each in look(redesigned()).files}
    assert [found[f"{name}.csv"] for name in KINDS] == [2, 3, 2]
    assert not Redesign.objects.exists()


def test_again_nothing_is_added_and_nothing_differs(tmp_path: Path) -> None:
    bring_in(tmp_path, redesigned())
    history = Redesign.history.count(), RedesignChange.history.count(), RolloutStep.history.count()
    work = bring_in(tmp_path, redesigned())
    assert work.state == "done", work.result
    assert {each["added"] for each in work.result["files"] if each["file"] != "lives.csv"} == {0}
    assert (Redesign.history.count(), RedesignChange.history.count(), RolloutStep.history.count()) == history


@pytest.mark.django_db(transaction=True)
@pytest.mark.parametrize("form", ["again", "again.zip", "again.xlsx"])
def test_an_export_gives_an_empty_book_the_same_redesigns(form: str, tmp_path: Path) -> None:
    bring_in(tmp_path, redesigned())
    manager = make.make_manager(code="MAN")
    drop_step(by=manager, step=RolloutStep.objects.get(module__code="K-10"), reason="goes away")
    before = exported(tmp_path)
    assert [row["module"] for row in before["rollout"]] == ["K-9"]
    write_export(tmp_path / form, Scope())
    empty_book()

    call_command("import_records", str(tmp_path / form), stdout=io.StringIO())

    again = exported(tmp_path, "second.zip")
    assert {name: again[name] for name in KINDS} == {name: before[name] for name in KINDS}
    assert replaced()[1] == ("LIP", "N-2", ["N-0", "N-1"])
    assert steps() == [("K-9", 2, "2024-03-08")]


def test_files_leave_what_the_actions_leave(tmp_path: Path) -> None:
    bring_in(tmp_path, redesigned(redesigns=None, replacements=None, rollout=None))
    part = {each.code: each for each in Part.objects.all()}
    changes = [PartReplaced(part["N-2"], [part["N-1"], part["N-0"]]), PartReplaced(part["G-2"], [part["G-1"]])]
    acted = save_redesign(
        by=None, code="LIP", name="Nut with a lip", hope=1.4, starts_on=make.on("2024-03-01"), cost_a_module="55.50",
        visits_a_failure=1, bench_hours_a_failure=0.25, stop_days_a_failure=2, note="keeps sand out", changes=changes,
    )  # fmt: skip
    modules = [Module.objects.get(code=code) for code in ("K-10", "K-9")]
    plan_rollout(by=None, redesign=acted, modules=modules, first_on=make.on("2024-03-01"), modules_a_week=1)
    work = bring_in(tmp_path, redesigned())
    assert work.state == "done", work.result
    added = {each["file"]: (each["added"], each["updated"]) for each in work.result["files"]}
    assert [added[f"{name}.csv"] for name in KINDS] == [(1, 0), (1, 0), (0, 0)], "only SCREW-2 is new"
    filed = Redesign.objects.get(code="SCREW-2")
    assert (filed.version, filed.history.count()) == (1, 1)
    past = RedesignChange.objects.get(redesign=filed).history.latest()
    assert [str(row.part) for row in past.replaces.all()] == [str(part_of("S-1"))]


def part_of(code: str) -> Part:
    return Part.objects.get(code=code)


def test_an_update_changes_parts_plan_and_hope_and_an_open_form_is_told(tmp_path: Path) -> None:
    bring_in(tmp_path, redesigned())
    lip = Redesign.objects.get(code="LIP")
    files = changed("replacements", 2, "replaces", "N-1")
    refused = problems(files)
    assert refused[0][:3] == ("replacements.csv", 2, "replaces")
    assert "differs from the book, which has “N-0 N-1”" in refused[0][3]
    assert bring_in(tmp_path, files, update=True).state == "done"
    assert replaced()[1] == ("LIP", "N-2", ["N-1"])
    with pytest.raises(RecordError):
        save_redesign(by=None, redesign=lip, version=lip.version, hope=3)
    assert bring_in(tmp_path, changed("rollout", 3, "planned_on", "2024-04-05"), update=True).state == "done"
    assert steps()[1] == ("K-9", 2, "2024-04-05")
    assert RolloutStep.objects.get(module__code="K-9").history.count() == 2


def test_without_an_order_modules_come_to_the_end_and_those_of_the_plan_stay(tmp_path: Path) -> None:
    bring_in(tmp_path, redesigned())
    K11 = "K-11,BRUSH,,,"
    modules = b"module,type,built_on,records_from,scrapped_on\nK-9,BRUSH,2024-01-01,,\nK-10,BRUSH,,,\n" + K11.encode()
    plain = "redesign,module\nLIP,K-11\nLIP,K-9\n"
    work = bring_in(tmp_path, redesigned(modules=modules, rollout=plain))
    assert work.state == "done", work.result
    assert [module for module, *_ in steps()] == ["K-10", "K-9", "K-11"]


@pytest.mark.parametrize(
    ("files", "told"),
    [
        (changed("redesigns", 2, "hope", "0.5"), ("redesigns.csv", 2, "hope", "from 1.01 to 100")),
        (changed("redesigns", 2, "starts_on", "2999-01-01"), ("redesigns.csv", 2, "starts_on", "Check the year")),
        (changed("redesigns", 2, "cost_a_module", "-1"), ("redesigns.csv", 2, "cost_a_module", "Enter an amount")),
        (
            more("redesigns", "BARE,,,,,,,,"),
            ("redesigns.csv", 4, "redesign", "has no new part yet. Say in replacements"),
        ),
        (changed("replacements", 2, "replaces", "N-2"), ("replacements.csv", 2, "replaces", "cannot replace itself")),
        (changed("replacements", 2, "replaces", "S-1"), ("replacements.csv", 2, "replaces", "of another component")),
        (changed("replacements", 2, "replaces", "X-9"), ("replacements.csv", 2, "replaces", "Add it to parts.csv")),
        (changed("replacements", 2, "replaces", ""), ("replacements.csv", 2, "replaces", "is missing")),
        (changed("replacements", 2, "redesign", "LOP"), ("replacements.csv", 2, "redesign", "Add the redesign to")),
        (more("replacements", "LIP,N-1,N-0"), ("replacements.csv", 5, "part", "same component as N-2, which this")),
        (more("replacements", "LIP,N-2,N-0"), ("replacements.csv", 5, "redesign", "repeats row 2")),
        (changed("rollout", 2, "module", "K-99"), ("rollout.csv", 2, "module", "Add it to modules.csv")),
        (changed("rollout", 2, "planned_on", "soon"), ("rollout.csv", 2, "planned_on", "Write it like 2026-03-09")),
        (changed("rollout", 2, "planned_on", "2999-01-01"), ("rollout.csv", 2, "planned_on", "Check the year")),
        (more("rollout", "LIP,K-9,3,"), ("rollout.csv", 4, "redesign", "repeats row 3")),
    ],
)
def test_what_is_wrong_is_said_with_file_row_and_column(
    files: dict[str, str | bytes], told: tuple[str, int, str, str]
) -> None:
    found = problems(files)
    assert any(each[:3] == told[:3] and told[3] in each[3] for each in found), found
    assert not Redesign.objects.exists()


def test_one_new_part_a_component_in_the_book_and_the_files_together(tmp_path: Path) -> None:
    bring_in(tmp_path, redesigned())
    found = problems({"replacements": "redesign,part,replaces\nLIP,N-1,N-0\n"})
    assert [each[:3] for each in found] == [("replacements.csv", 2, "part")]
    assert "Make a redesign of each, and compare them on its page." in found[0][3]


def test_who_sees_no_redesigns_takes_none_out_and_costs_stay_with_those_who_see_them(tmp_path: Path) -> None:
    bring_in(tmp_path, redesigned())
    weir, shed = Site.objects.get(code="WEIR"), Site.objects.get(code="SHED")
    crew = exported(tmp_path, "crew.zip", scope_of(make.make_crew(weir, code="CREW")))
    assert crew["redesigns"] == crew["replacements"] == crew["rollout"] == []
    there = exported(tmp_path, "shed.zip", scope_of(make.make_planner(code="PLAN", sites=[shed])))
    assert [row["module"] for row in there["rollout"]] == ["K-9"], "K-10 never stood there"
    assert [row["redesign"] for row in there["redesigns"]] == ["LIP", "SCREW-2"]
    assert exported(tmp_path, "all.zip", Scope(costs=False))["redesigns"][0]["cost_a_module"] == ""


def test_a_plan_changed_meanwhile_is_checked_again(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Somebody moves a step between the check and the store: the import looks again and says what differs."""
    bring_in(tmp_path, redesigned())
    step, reserve, done = RolloutStep.objects.get(module__code="K-9"), storing.Store.reserve_numbers, []

    def moved_before(self: storing.Store) -> None:
        if not done:
            done.append(move_step(by=None, step=step, planned_on=make.on("2024-09-09")))
        reserve(self)

    monkeypatch.setattr(storing.Store, "reserve_numbers", moved_before)
    work = bring_in(tmp_path, redesigned())
    assert done
    assert work.result["errors"][0]["column"] == "planned_on", work.result
