"""What is taken out can be brought in again, and nobody takes out what they may not see."""

from __future__ import annotations

import csv
import io
import zipfile
from pathlib import Path
from typing import Any

import pytest
from django.core.management import call_command

from fleet.actions.strike_out import strike_out
from fleet.models import ClockPoint, FittingClock, Person, Reading, Site
from fleet.transfer.export_records import kept_exactly, write_export
from fleet.transfer.scope import Scope, scope_of
from tests import factories as make
from tests.fleet.transfer.files import bring_in, fleet, text, with_cell

pytestmark = pytest.mark.django_db
TABLES = ["sites", "people", "components", "modes", "types", "positions", "parts", "redesigns", "replacements",
          "stores", "supply", "capacity", "modules", "rollout", "placements", "bench", "hours", "visits", "fittings",
          "findings", "stops", "readings", "moves", "lives"]  # fmt: skip


def exported(tmp_path: Path, name: str = "out.zip", scope: Scope | None = None) -> dict[str, list[dict[str, str]]]:
    path = tmp_path / name
    write_export(path, scope or Scope())
    with zipfile.ZipFile(path) as archive:
        return {
            entry.removesuffix(".csv"): list(csv.DictReader(io.StringIO(archive.read(entry).decode())))
            for entry in archive.namelist()
        }


def clocks() -> list[Any]:
    """Every derived age, by codes that are the same in every book."""
    knots = ClockPoint.objects.order_by("module__code", "day").values_list(
        "module__code", "day", "days", "hours", "strokes", "measured", "seen_working"
    )
    spans = FittingClock.objects.order_by("fitting__code").values_list(
        "fitting__code", "site__code", "fitted_day", "end_day", "days_at_fit", "days_at_end", "strokes_at_fit",
        "strokes_at_end", "hours_at_fit", "hours_at_end", "strokes_measured", "last_good_day",
    )  # fmt: skip
    return [list(knots), list(spans)]


def empty_book() -> None:
    """Forgets everything, so that the export comes into an empty book."""
    call_command("flush", interactive=False, verbosity=0)


@pytest.mark.django_db(transaction=True)
@pytest.mark.parametrize("form", ["again", "again.zip", "again.xlsx"])
def test_an_export_comes_back_the_same(form: str, tmp_path: Path) -> None:
    odd = with_cell("readings", 5, "hours", "0.1234567890123456789").replace("C2", "=C2")
    sites = with_cell("sites", 2, "hours_per_day", repr(1 / 3))
    bring_in(tmp_path, fleet(readings=odd, sites=sites))
    reading = Reading.objects.get(play_mm=0.4)
    strike_out(by=make.make_manager(code="MAN"), record=reading, reason="measured twice")
    before, ages = exported(tmp_path), clocks()
    write_export(tmp_path / form, Scope())
    empty_book()

    call_command("import_records", str(tmp_path / form), stdout=io.StringIO())

    assert exported(tmp_path, "second.zip") == before
    assert clocks() == ages
    assert list(before) == TABLES


@pytest.mark.django_db(transaction=True)
@pytest.mark.parametrize("name", ["=1+1", "+cmd", "-2 m", "@sum", "'=1+1", "''-", "'n Sluis", "a=b"])
def test_a_text_that_a_spreadsheet_would_run_is_quoted_and_comes_back(name: str, tmp_path: Path) -> None:
    site = make.make_site(name=name)
    shown = exported(tmp_path)["sites"][0]["name"]
    assert not shown.startswith(("=", "+", "-", "@"))
    write_export(tmp_path / "again.zip", Scope())
    empty_book()
    call_command("import_records", str(tmp_path / "again.zip"), stdout=io.StringIO())
    assert Site.objects.get(code=site.code).name == name


def test_no_passwords_and_only_measured_counts(tmp_path: Path) -> None:
    bring_in(tmp_path)
    files = exported(tmp_path)

    assert set(files["people"][0]) == {"person", "name", "role", "sites", "active"}
    assert [row["strokes_at_removal"] for row in files["fittings"]].count("") == 3
    assert files["readings"][0]["read_at"] == "2024-01-10T12:00:00+00:00"


def test_instants_are_written_in_the_sites_zone(tmp_path: Path) -> None:
    bring_in(tmp_path)
    assert exported(tmp_path)["readings"][-1]["read_at"] == "2024-08-01T10:00:00+01:00"


def test_one_site_and_nothing_of_the_others(tmp_path: Path) -> None:
    other = text("sites") + "FORD,The ford,field,\n"
    stays = text("placements").replace("K-10,WEIR,B2", "K-10,FORD,B2")
    bring_in(tmp_path, fleet(sites=other, placements=stays))

    files = exported(tmp_path, scope=scope_of(None, Site.objects.get(code="FORD")))

    assert [row["module"] for row in files["modules"]] == ["K-10"]
    assert [row["fitting"] for row in files["fittings"]] == ["F-4"]
    assert [row["site"] for row in files["sites"]] == ["FORD"]
    assert files["readings"] == files["stops"] == files["findings"] == files["lives"] == []
    assert [row["person"] for row in files["people"]] == []


@pytest.mark.django_db(transaction=True)
def test_what_one_site_gave_comes_into_an_empty_book(tmp_path: Path) -> None:
    bring_in(tmp_path)
    write_export(tmp_path / "weir.zip", scope_of(None, Site.objects.get(code="WEIR")))
    empty_book()

    call_command("import_records", str(tmp_path / "weir.zip"), stdout=io.StringIO())

    assert Site.objects.get().code == "WEIR"


def test_a_planner_of_one_site_takes_out_that_site(tmp_path: Path) -> None:
    bring_in(tmp_path)
    shed = Site.objects.get(code="SHED")
    planner = make.make_planner(sites=[shed])

    files = exported(tmp_path, scope=scope_of(planner))

    assert [row["site"] for row in files["placements"]] == ["SHED"]
    assert files["visits"] == []
    assert files["parts"][0]["unit_cost"] == "12.00"
    assert scope_of(planner, Site.objects.get(code="WEIR")).sites == frozenset()


def test_a_planner_takes_out_no_list_of_people(tmp_path: Path) -> None:
    bring_in(tmp_path)
    Person.objects.create_user("EXTRA", name="Extra", role="crew")

    files = exported(tmp_path, scope=scope_of(make.make_planner(code="PLAN")))

    assert [row["person"] for row in files["people"]] == ["ANNA"]  # whom the records name
    assert files["people"][0]["sites"] == ""


def test_numbers_that_a_workbook_cannot_keep() -> None:
    assert kept_exactly(0.1)
    assert kept_exactly(123456789)
    assert not kept_exactly(0.1 + 0.2)
    assert not kept_exactly(2**53 + 1)
