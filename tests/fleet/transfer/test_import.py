"""Files into the book: what is stored, what is passed over, what is updated."""

from __future__ import annotations

import datetime as dt
from decimal import Decimal
from pathlib import Path

import pytest
from django.db import connection

from fleet.models import (
    ClockPoint,
    DataVersion,
    Finding,
    Fitting,
    FittingClock,
    KeptFile,
    LifeSet,
    Module,
    Part,
    Person,
    Placement,
    Reading,
    Site,
    Stop,
    Visit,
    Work,
)
from fleet.models.codes import natural_key, validate_code
from fleet.transfer.made_visits import made_code
from fleet.work import run_here
from tests.factories import make_manager, make_person
from tests.fleet.transfer.files import bring_in, fleet, look, problems, text, with_cell, zipped

pytestmark = pytest.mark.django_db


def test_everything_arrives(tmp_path: Path) -> None:
    work = bring_in(tmp_path)

    assert (work.state, work.result["error_count"], work.result["stored"]) == ("done", 0, True)
    failed = Fitting.objects.get(code="F-1")
    assert (failed.reason, failed.mode.code, failed.strokes_at_removal) == ("failed", "WORN", 5000)
    assert failed.removed_visit.code == "V-1"
    assert Fitting.objects.get(code="F-3").caused_by == failed
    assert Part.objects.get(code="N-2").supersedes.code == "N-1"
    assert list(Part.objects.get(code="N-2").fits_types.values_list("code", flat=True)) == ["BRUSH"]
    assert Part.objects.get(code="N-2").unit_cost == Decimal("14.50")
    assert list(Person.objects.get(code="ANNA").sites.values_list("code", flat=True)) == ["WEIR"]
    assert Person.objects.get(code="MAX").all_sites
    assert not Person.objects.get(code="MAX").has_usable_password()
    assert Finding.objects.get().note == "sand in it"
    assert Stop.objects.get().reported_by.code == "ANNA"
    assert LifeSet.objects.get().lives.count() == 3
    connection.check_constraints()  # the embedded database does not look at references while files are stored


def test_local_times_become_utc_and_days_stay_days(tmp_path: Path) -> None:
    later = with_cell("visits", 2, "happened_at", "2024-07-05T00:30")
    bring_in(tmp_path, fleet(visits=later, fittings=None, readings=None, stops=None))

    visit = Visit.objects.get(code="V-1")
    assert visit.happened_at == dt.datetime(2024, 7, 4, 23, 30, tzinfo=dt.UTC)  # summer time in Lisbon
    assert visit.happened_on == dt.date(2024, 7, 5)


def test_an_offset_is_taken_as_it_is(tmp_path: Path) -> None:
    bring_in(tmp_path, fleet(visits=with_cell("visits", 2, "happened_at", "2024-03-01T10:00+05:30")))

    assert Visit.objects.get(code="V-1").happened_at == dt.datetime(2024, 3, 1, 4, 30, tzinfo=dt.UTC)


def test_a_visit_is_made_for_each_module_and_day_without_one(tmp_path: Path) -> None:
    bring_in(tmp_path)

    first = Fitting.objects.get(code="F-1").fitted_visit
    assert first.code == "V-K-9-20240110"
    assert first.happened_at == dt.datetime(2024, 1, 10, 12, tzinfo=dt.UTC)
    assert Fitting.objects.get(code="F-3").fitted_visit == first
    assert Fitting.objects.get(code="F-2").fitted_visit.code == "V-1"  # the visit of that day is taken
    assert Visit.objects.count() == 3


@pytest.mark.parametrize("module", ["K-9", "M007", "X" * 40])
def test_a_made_visit_has_a_code_that_sorts_naturally(module: str) -> None:
    code, order = made_code(module, dt.date(2024, 1, 10))

    validate_code(code)
    assert order == natural_key(code)
    assert code == made_code(module, dt.date(2024, 1, 10))[0]


def test_derived_columns_and_clocks_are_made(tmp_path: Path) -> None:
    before = DataVersion.current()
    bring_in(tmp_path)

    module, site = Module.objects.get(code="K-9"), Site.objects.get(code="WEIR")
    assert module.code_order == "K-000000000009"
    assert site.folded == "weir weir at the mill"
    assert set(Visit.objects.values_list("site__code", flat=True)) == {"WEIR"}
    assert Stop.objects.get().site == site
    assert set(Reading.objects.values_list("site__code", flat=True)) == {"WEIR"}
    assert ClockPoint.objects.filter(module=module).exists()
    assert FittingClock.objects.get(fitting__code="F-1").strokes_at_end == 5000
    assert DataVersion.current() > before


def test_a_second_import_changes_nothing(tmp_path: Path) -> None:
    bring_in(tmp_path)
    counts = [model.objects.count() for model in (Visit, Fitting, Reading, Placement, Stop, LifeSet)]
    history = Fitting.history.count()

    again = bring_in(tmp_path)

    assert again.state == "done"
    assert {(each["added"], each["updated"]) for each in again.result["files"]} == {(0, 0)}
    assert [model.objects.count() for model in (Visit, Fitting, Reading, Placement, Stop, LifeSet)] == counts
    assert Fitting.history.count() == history


def test_rows_may_stand_in_any_order(tmp_path: Path) -> None:
    head, *rows = text("fittings").splitlines()
    placements = text("placements").splitlines()
    work = bring_in(
        tmp_path,
        fleet(
            fittings="\n".join([head, *reversed(rows)]),
            placements="\n".join([placements[0], *reversed(placements[1:])]),
        ),
    )

    assert work.state == "done", work.result
    assert Fitting.objects.get(code="F-3").caused_by.code == "F-1"


def test_a_subset_builds_on_the_book(tmp_path: Path) -> None:
    bring_in(tmp_path, fleet(fittings=None, findings=None, stops=None, readings=None, visits=None))
    work = bring_in(tmp_path, {"visits": text("visits"), "fittings": text("fittings")})

    assert work.state == "done", work.result
    assert Fitting.objects.count() == 4


def test_present_and_different_is_reported(tmp_path: Path) -> None:
    bring_in(tmp_path)
    changed = {"fittings": with_cell("fittings", 3, "part", "N-1"), "sites": with_cell("sites", 2, "name", "Mill")}

    found = problems(look(changed))

    assert [each[:3] for each in found] == [("sites.csv", 2, "name"), ("fittings.csv", 3, "part")]
    assert "which has “N-2”" in found[1][3]
    assert bring_in(tmp_path, changed).state == "failed"
    assert Fitting.objects.get(code="F-2").part.code == "N-2"


def test_a_difference_is_told_in_codes(tmp_path: Path) -> None:
    bring_in(tmp_path)
    part = "part,component\nN-3,NUT\n"
    (found,) = look({"parts": part, "fittings": with_cell("fittings", 3, "part", "N-3")}).problems

    assert (found.column, found.value) == ("part", "N-3")
    assert "the book, which has “N-2”" in found.message


def test_update_overwrites_with_history_and_version(tmp_path: Path) -> None:
    bring_in(tmp_path)
    ended = "fitting,module,position,part,removed_on,reason\nF-2,K-9,N1,N-2,2024-05-01,planned\n"
    work = bring_in(tmp_path, {"fittings": ended, "people": with_cell("people", 2, "sites", "all")}, update=True)

    fitting = Fitting.objects.get(code="F-2")
    assert work.state == "done", work.result
    assert (fitting.removed_on, fitting.reason, fitting.version) == (dt.date(2024, 5, 1), "planned", 2)
    assert fitting.fitted_on == dt.date(2024, 3, 1)  # a column that the file does not have is left alone
    assert fitting.removed_visit.happened_on == dt.date(2024, 5, 1)
    assert [row.history_type for row in fitting.history.all()] == ["~", "+"]
    assert fitting.history.first().source == "command"
    assert FittingClock.objects.get(fitting=fitting).end_day == dt.date(2024, 5, 1).toordinal()
    anna = Person.objects.get(code="ANNA")
    assert anna.all_sites
    assert not anna.sites.exists()


@pytest.mark.parametrize(
    ("row", "words"),
    [
        ("NEW,New,administrator,all,yes", "by an administrator only"),
        ("ROOT,Root,administrator,all,no", "by an administrator only"),
        ("ROOT,Root,crew,,yes", "by an administrator only"),
        ("MONA,Mona,administrator,all,yes", "by an administrator only"),
        ("MONA,Mona,crew,all,yes", "Ask another manager"),
        ("MONA,Mona,manager,all,no", "Ask another manager"),
        ("ROOT,Root,administrator,all,yes", ""),
        ("MONA,Mona,manager,all,yes", ""),
        ("NEW,New,manager,all,yes", ""),
    ],
)
def test_a_file_gives_a_manager_no_more_than_the_page_of_people(row: str, words: str) -> None:
    mona = make_manager(code="MONA", name="Mona")
    make_person(role="administrator", code="ROOT", name="Root")
    content = zipped({"people": f"person,name,role,sites,active\n{row}\n"})
    other = make_person(role="administrator")
    for by, refused in ((mona, bool(words)), (other, False)):
        work = Work.objects.create(kind="preview_records", person=by, arguments={"update": True})
        KeptFile.objects.create(work=work, role="input", name="people.zip", content=content)
        outcome = run_here(work).result
        assert [words in each["message"] for each in outcome.get("errors", [])] == [True] * refused


def test_update_may_strike_out_but_not_undo_it(tmp_path: Path) -> None:
    bring_in(tmp_path)
    struck = {"fittings": with_cell("fittings", 5, "struck_out", "wrong module")}
    assert bring_in(tmp_path, struck, update=True).state == "done"

    fitting = Fitting.objects.get(code="F-4")
    assert fitting.struck_out == "wrong module"
    assert fitting.struck_out_at is not None
    assert "stays so" in problems(look({"fittings": with_cell("fittings", 5, "struck_out", "")}, update=True))[0][3]


def test_update_keeps_the_component_of_a_position_in_use(tmp_path: Path) -> None:
    bring_in(tmp_path)
    found = problems(look({"positions": with_cell("positions", 2, "component", "SCREW")}, update=True))

    assert found[0][:3] == ("positions.csv", 2, "component")
    assert "fittings of this position" in found[0][3]


def test_a_preview_says_what_would_be_added_and_stores_nothing() -> None:
    outcome = look(fleet())

    added = {each["file"]: each["added"] for each in outcome.files}
    assert (added["fittings.csv"], added["readings.csv"], added["visits.csv"]) == (4, 4, 1)
    assert next(each for each in outcome.files if each["file"] == "visits.csv")["made"] == 2
    assert not outcome.problems
    assert not Site.objects.exists()
    assert not Work.objects.exists()


def test_a_set_of_lives_comes_in_once(tmp_path: Path) -> None:
    bring_in(tmp_path)

    found = problems(look({"lives": with_cell("lives", 2, "count", "3")}))

    assert found == [("lives.csv", 2, "set", found[0][3])]
    assert "A set comes in once" in found[0][3]


def test_readings_carry_their_batch(tmp_path: Path) -> None:
    work = bring_in(tmp_path)

    assert set(Reading.objects.values_list("batch", flat=True)) == {work.pk}


def test_a_site_without_a_zone_equals_one_with_the_books(tmp_path: Path) -> None:
    bring_in(tmp_path, fleet(sites=with_cell("sites", 2, "zone", "")))

    assert problems(look({"sites": with_cell("sites", 2, "zone", "UTC")})) == []
    assert len(problems(look({"sites": text("sites")}))) == 1
