"""Every wrong cell is named with file, row, column and remedy, and one wrong cell stores nothing."""

from __future__ import annotations

import datetime as dt
from pathlib import Path

import pytest
from django.utils import timezone

from fleet.models import Fitting, Site, Visit
from tests.fleet.transfer.files import bring_in, fleet, look, problems, text, with_cell, with_rows

pytestmark = pytest.mark.django_db
TOMORROW = (timezone.now() + dt.timedelta(days=2)).date().isoformat()
LONG = "x" * 10_000

BAD_CELLS = [
    ("sites", 2, "site", "WEIR 1", "is no code"),
    ("sites", 2, "site", "W" * 41, "is no code"),
    ("sites", 2, "name", LONG, "Shorten it to 120"),
    ("sites", 2, "name", "a\x00b", "NUL character"),
    ("sites", 2, "kind", "river", "Write one of: field, rig, depot"),
    ("sites", 2, "zone", "Lisbon", "Europe/Lisbon"),
    ("sites", 2, "hours_per_day", "25", "from 0 to 24"),
    ("sites", 2, "hours_per_day", "nan", "is no number"),
    ("sites", 2, "strokes_per_day", "3,5", "decimal point: 3.5"),
    ("sites", 2, "strokes_per_day", "1e999", "out of range"),
    ("sites", 2, "visit_every_days", "0", "from 1"),
    ("sites", 2, "reports_at_once", "maybe", "Write yes or no"),
    ("people", 2, "role", "boss", "Write one of"),
    ("people", 2, "sites", "MARS", "names site MARS"),
    ("people", 2, "person", "", "is missing"),
    ("components", 2, "clock", "years", "days, hours, strokes"),
    ("modes", 2, "component", "GEAR", "neither in the files nor in the book"),
    ("positions", 2, "component", "GEAR", "components.csv"),
    ("positions", 2, "order", "1.5", "whole number"),
    ("positions", 2, "order", "9" * 30, "out of range"),
    ("parts", 2, "supersedes", "N-7", "no part in the file or the book"),
    ("parts", 2, "supersedes", "N-2", "is the part itself"),
    ("parts", 2, "supersedes", "S-1", "of another component"),
    ("parts", 3, "supersedes", "N-2", "leads back to this part"),
    ("parts", 2, "fits_types", "OTHER", "names type OTHER"),
    ("parts", 2, "unit_cost", "1.234", "two decimals"),
    ("parts", 2, "unit_cost", "-1", "out of range"),
    ("modules", 2, "type", "OTHER", "types.csv"),
    ("modules", 2, "built_on", "2024-02-30", "no calendar"),
    ("modules", 2, "built_on", "1.2.2024", "like 2026-03-09"),
    ("modules", 2, "built_on", "1024-02-01", "before 1900"),
    ("modules", 2, "built_on", TOMORROW, "in the future"),
    ("modules", 2, "scrapped_on", "2023-12-31", "before the day it was built"),
    ("placements", 2, "site", "MARS", "sites.csv"),
    ("placements", 2, "to_on", "2024-01-09", "before the day it came"),
    ("placements", 2, "to_on", "2024-06-02", "overlaps another stay of this module"),
    ("visits", 2, "module", "K-11", "modules.csv"),
    ("visits", 2, "happened_at", "2024-03-31T01:30", "clocks went forward"),
    ("visits", 2, "happened_at", "half past nine", "is no time"),
    ("visits", 2, "happened_at", "2024-03-01T25:00", "no calendar"),
    ("visits", 2, "happened_at", f"{TOMORROW}T09:00", "in the future"),
    ("visits", 2, "happened_at", "2023-03-01T10:00", "before the module was built"),
    ("visits", 2, "crew", "BOB", "people.csv"),
    ("visits", 2, "left", "gone", "running, stopped, to bench"),
    ("visits", 2, "known_on", "2024-02-01", "before the day it happened"),
    ("fittings", 2, "position", "N7", "no position of this module's type"),
    ("fittings", 2, "part", "S-1", "of another component"),
    ("fittings", 2, "mode", "BENT", "no failure mode of this component"),
    ("fittings", 2, "reason", "", "is missing"),
    ("fittings", 3, "reason", "failed", "removed_on is empty"),
    ("fittings", 2, "reason", "planned", "Leave the mode empty"),
    ("fittings", 2, "removed_on", "2024-01-09", "before the day it was fitted"),
    ("fittings", 2, "failed_on", "2024-03-02", "after the day it came out"),
    ("fittings", 4, "failed_on", "2024-02-02", "Leave the day empty"),
    ("fittings", 2, "last_good_on", "2024-01-01", "before the day it was fitted"),
    ("fittings", 2, "fitted_on", "2023-12-01", "before the module was built"),
    ("fittings", 2, "removed_visit", "V-9", "neither in visits.csv nor in the book"),
    ("fittings", 2, "fitted_visit", "V-1", "was on 2024-03-01"),
    ("fittings", 4, "caused_by", "F-9", "no fitting in the file or the book"),
    ("fittings", 4, "caused_by", "F-4", "no standing fitting of this module"),
    ("fittings", 2, "caused_by", "F-3", "taken with another"),
    ("fittings", 2, "strokes_at_fit", "6000", "below strokes_at_fit"),
    ("fittings", 2, "age_at_fit", "-1", "out of range"),
    ("fittings", 2, "job", "J-1", "neither in the files nor in the book"),
    ("fittings", 3, "fitted_on", "2024-02-01", "overlaps another part in this position"),
    ("findings", 2, "finding", "broken", "failed, adjusted, cleaned, nothing found"),
    ("findings", 2, "position", "N7", "no position of this module's type"),
    ("findings", 2, "visit", "V-9", "neither in visits.csv"),
    ("stops", 2, "running_at", "2024-02-27T10:00", "before it stopped"),
    ("stops", 2, "reported_by", "BOB", "people.csv"),
    ("readings", 3, "strokes", "-5", "out of range"),
    ("readings", 2, "strokes", "6000", "below"),
    ("readings", 4, "position", "", "is missing"),
    ("readings", 4, "play_mm", "", "is empty, and so are hours"),
    ("readings", 3, "restarts", "exploded", "rolled over, reset"),
    ("readings", 2, "restarts", "rolled over", "first reading"),
    ("lives", 2, "entry_age", "100.5", "not below the age"),
    ("lives", 2, "last_good_age", "101", "above the age"),
    ("lives", 2, "part", "S-1", "another component"),
    ("lives", 2, "count", "0", "from 1"),
]
# What is wrong between two rows or two cells is told at the later one.
AT_THE_OTHER_ROW = {"below", "leads back to this part", "overlaps another stay of this module"}
BESIDE = {
    "removed_on is empty": ["strokes_at_removal"],
    "Leave the mode empty": ["mode"],
    "overlaps another part in this position": ["fitted_on"],
    "below strokes_at_fit": ["strokes_at_removal"],
    "is empty, and so are hours": ["strokes"],
    "before the module was built": ["fitted_on", "happened_at"],
}


@pytest.mark.parametrize(("name", "row", "column", "value", "words"), BAD_CELLS)
def test_a_bad_cell_is_named(name: str, row: int, column: str, value: str, words: str) -> None:
    outcome = look(fleet(**{name: with_cell(name, row, column, value)}))

    found = problems(outcome)
    assert any(each[0] == f"{name}.csv" and words in each[3] for each in found), found
    if words not in AT_THE_OTHER_ROW:
        exact = next(each for each in found if each[0] == f"{name}.csv" and words in each[3])
        assert exact[1] == row
        assert exact[2] in {column, *BESIDE.get(words, ())}


def test_one_bad_row_stores_nothing(tmp_path: Path) -> None:
    work = bring_in(tmp_path, fleet(fittings=with_cell("fittings", 5, "part", "NONE")))

    assert work.state == "failed"
    assert work.message == "1\N{NO-BREAK SPACE}error. Nothing was stored."
    assert not Site.objects.exists()
    assert not Visit.objects.exists()
    assert not Fitting.history.exists()


def test_all_errors_are_told_not_only_the_first() -> None:
    outcome = look(
        fleet(
            sites=with_cell("sites", 2, "kind", "river"),
            modules=with_cell("modules", 2, "built_on", "soon"),
            fittings=with_cell("fittings", 3, "part", "S-1"),
            readings=with_cell("readings", 3, "strokes", "many"),
        )
    )

    assert {each[0] for each in problems(outcome)} == {"sites.csv", "modules.csv", "fittings.csv", "readings.csv"}


def test_a_bad_row_does_not_drag_down_what_refers_to_it() -> None:
    outcome = look(fleet(modules=with_cell("modules", 2, "type", "OTHER")))

    assert [each[:3] for each in problems(outcome)] == [("modules.csv", 2, "type")]


def test_a_thousand_are_listed_then_counted() -> None:
    rows = [f"X-{number},K-9,N1,NONE,2024-01-10" for number in range(1500)]
    outcome = look(fleet(fittings="fitting,module,position,part,fitted_on\n" + "\n".join(rows)))

    assert outcome.problems.count == 1500
    assert len(outcome.problems.listed) == 1000


@pytest.mark.parametrize(
    ("name", "row", "words"),
    [
        ("sites", "WEIR,again,field,", "repeats row 2"),
        ("people", "anna,Anna,crew,,", "repeats row 2"),
        ("modes", "NUT,WORN,again,,,", "repeats row 2"),
        ("positions", "BRUSH,N1,NUT,3", "repeats row 2"),
        ("placements", "K-10,WEIR,B9,2024-01-10,", "repeats row 5"),
        ("visits", "V-1,K-10,2024-03-01T10:00,,,,", "repeats row 2"),
        ("fittings", "F-1,K-10,S1,S-1,2024-01-10,,,,,,", "repeats row 2"),
        ("findings", "V-1,S1,cleaned,,", "repeats row 2"),
        ("stops", "K-9,2024-02-28T08:00,2024-02-28T09:00,,,,", "repeats row 2"),
        ("readings", "K-9,2024-03-01T10:00,C1,,5001,,,,,,", "repeats row 3"),
    ],
)
def test_a_record_may_stand_once(name: str, row: str, words: str) -> None:
    found = problems(look(fleet(**{name: with_rows(name, row)})))

    assert any(each[0] == f"{name}.csv" and words in each[3] for each in found), found


@pytest.mark.parametrize(
    ("stay", "clashes"),
    [
        ("F-9,K-9,N1,N-1,2024-02-01,2024-02-01,planned,,,,", True),  # within another stay, of no length
        ("F-9,K-9,N1,N-1,2024-01-10,2024-01-10,planned,,,,", False),  # at its very beginning
        ("F-9,K-9,N1,N-1,2024-03-01,2024-03-01,planned,,,,", False),  # between two
        ("F-9,K-9,N1,N-1,,2024-01-10,planned,,,,", False),  # before anybody wrote it down
        ("F-9,K-9,N1,N-1,,2024-01-11,planned,,,,", True),
        ("F-9,K-9,N1,N-1,2024-04-01,2024-05-01,planned,,,,", True),  # within the one that is in now
        ("F-9,K-9,N1,N-1,2024-06-01,,,,,,", True),  # a second one that is in now
        ("F-9,K-9,N1,N-1,,,,,,,", True),
    ],
)
def test_stays_of_a_position_do_not_overlap(stay: str, clashes: bool) -> None:
    found = problems(look(fleet(fittings=with_rows("fittings", stay))))

    assert any("overlaps another part" in each[3] for each in found) == clashes, found


def test_a_struck_out_fitting_overlaps_nothing() -> None:
    struck = (
        with_cell("fittings", 2, "struck_out", "entered twice") + "F-9,K-9,N1,N-1,2024-01-10,2024-03-01,failed,,,,,\n"
    )
    assert problems(look(fleet(fittings=struck.replace(",F-1,", ",,")))) == []


def test_overlaps_with_the_book_are_found(tmp_path: Path) -> None:
    bring_in(tmp_path)

    found = problems(look({"fittings": "fitting,module,position,part,fitted_on\nF-9,K-10,N1,N-1,2024-05-01\n"}))
    stopped = problems(look({"stops": "module,stopped_at,running_at\nK-9,2024-02-29T08:00,2024-02-29T09:00\n"}))
    earlier = problems(look({"fittings": "fitting,module,position,part,fitted_on\nF-9,K-10,N1,N-1,2024-01-09\n"}))

    assert "overlaps another part in this position: one that has no end" in found[0][3]
    assert "overlaps another stop" in stopped[0][3]
    assert "the one in the book that begins on 2024-01-10" in earlier[0][3]


def test_headers() -> None:
    unknown = problems(look(fleet(sites=text("sites").replace("zone", "timezone"))))
    missing = problems(look(fleet(modules="module\nK-9\n")))
    twice = problems(look(fleet(sites=text("sites").replace("zone", "name"))))
    empty = problems(look(fleet(sites="")))

    assert unknown[0][:2] == ("sites.csv", 1)
    assert "is no column of this file" in unknown[0][3]
    assert missing[0][:3] == ("modules.csv", 1, "type")
    assert "stands twice" in twice[0][3]
    assert "has no header row" in empty[0][3]


def test_a_note_is_allowed_everywhere() -> None:
    assert problems(look(fleet(sites=with_cell("sites", 2, "note", "by the road")))) == []


def test_strange_files() -> None:
    found = problems(look(fleet(shopping="what\nbread\n")))

    assert found[0][0] == "shopping.csv"
    assert "is no records file" in found[0][3]


def test_a_cell_beyond_the_header() -> None:
    found = problems(look(fleet(components=with_rows("components", "SEAL,Seal,days,red"))))

    assert "beyond the last column" in found[0][3]
