"""The commands: what they print, and the status they end with."""

from __future__ import annotations

import io
import json
from pathlib import Path
from typing import Any

import pytest
from django.core.management import CommandError, call_command, get_commands, load_command_class
from django.db import connection
from django.test import Client

from fleet.models import Fitting, Person, Reading, Site
from fleet.transfer import whole_book
from tests import factories as make
from tests.fleet.transfer.files import FLEET, bring_in, fleet, text, with_cell

pytestmark = pytest.mark.django_db


def folder(path: Path, **files: str) -> str:
    path.mkdir()
    for name, body in files.items():
        (path / f"{name}.csv").write_text(body)
    return str(path)


def run(*arguments: Any, **options: Any) -> str:
    out = io.StringIO()
    call_command(*arguments, stdout=out, **options)
    return out.getvalue()


def test_import_prints_a_table(tmp_path: Path) -> None:
    path = folder(tmp_path / "fleet", **{name: text(name) for name in FLEET})

    looked, stored = run("import_records", path, "--preview"), run("import_records", path)

    assert "would be added" in looked.splitlines()[0]
    assert "this was a preview" in looked
    assert stored.splitlines()[-1] == "Stored."
    assert [line.split() for line in stored.splitlines() if line.startswith("visits")] == [
        ["visits.csv", "1", "1", "and", "2", "made", "0", "0"]
    ]
    assert Fitting.objects.first().history.first().source == "command"  # type: ignore[union-attr]


def test_import_as_one_document(tmp_path: Path) -> None:
    path = folder(tmp_path / "fleet", sites=text("sites"))

    answer = json.loads(run("import_records", path, "--json"))

    assert answer["files"] == [{"file": "sites.csv", "rows": 2, "added": 2, "passed_over": 0, "updated": 0}]
    assert (answer["stored"], answer["error_count"], answer["errors"]) == (True, 0, [])


def test_import_errors_go_to_standard_error(tmp_path: Path) -> None:
    path = folder(tmp_path / "fleet", sites=with_cell("sites", 2, "kind", "river"))
    out = io.StringIO()

    with pytest.raises(CommandError) as raised:
        call_command("import_records", path, "--json", stdout=out)

    assert raised.value.returncode == 1
    assert "sites.csv, row 2, kind “river”: is not known here. Write one of: field, rig, depot." in str(raised.value)
    assert "Nothing was stored" in str(raised.value)
    document = json.loads(out.getvalue())
    assert document["errors"][0] == {
        "file": "sites.csv", "row": 2, "column": "kind", "value": "river",
        "message": "is not known here. Write one of: field, rig, depot.",
    }  # fmt: skip


def test_import_of_what_is_not_there(tmp_path: Path) -> None:
    with pytest.raises(CommandError, match="does not exist"):
        run("import_records", str(tmp_path / "none"))


@pytest.mark.parametrize(
    "command", ["import_records", "export_records", "backup", "restore", "work", "first_manager", "reset_link"]
)
def test_wrong_usage_ends_with_two_and_help_with_nought(command: str) -> None:
    def status(*arguments: str) -> Any:
        name = get_commands()[command]
        with pytest.raises(SystemExit) as ended:
            load_command_class(name, command).run_from_argv(["manage.py", command, *arguments])
        return ended.value.code

    assert status("--no-such-option") == 2
    assert status("--help") == 0


def test_export_by_the_ending(tmp_path: Path) -> None:
    bring_in(tmp_path)

    table = run("export_records", str(tmp_path / "out"))
    document = json.loads(run("export_records", str(tmp_path / "out.zip"), "--json", "--site", "weir"))

    assert "fittings" in table
    assert (tmp_path / "out" / "readings.csv").exists()
    assert {"file": "fittings.csv", "rows": 4} in document["files"]
    with pytest.raises(CommandError, match="exists already"):
        run("export_records", str(tmp_path / "out.zip"))
    with pytest.raises(CommandError, match="No site has the code MARS"):
        run("export_records", str(tmp_path / "mars.zip"), "--site", "MARS")


@pytest.fixture
def no_terminal(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("sys.stdin", io.StringIO())
    monkeypatch.delenv("HALFNUT_MANAGER_PASSWORD", raising=False)


@pytest.mark.usefixtures("no_terminal")
def test_the_first_manager_by_a_link() -> None:
    printed = run("first_manager", "--code", "anna", "--name", "Anna Alves", "--address", "https://book.example/")

    anna = Person.objects.get()
    assert (anna.code, anna.role, anna.all_sites, anna.has_usable_password()) == ("ANNA", "manager", True, False)
    assert anna.history.first().source == "command"
    link = printed.splitlines()[-1]
    assert link.startswith("https://book.example/password/")
    assert Client().get(link.removeprefix("https://book.example"), follow=True).status_code == 200


@pytest.mark.usefixtures("no_terminal")
def test_the_first_manager_with_a_password(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("HALFNUT_MANAGER_PASSWORD", "short")
    with pytest.raises(CommandError, match="too short"):
        run("first_manager", "--code", "anna")
    assert not Person.objects.exists()

    monkeypatch.setenv("HALFNUT_MANAGER_PASSWORD", "quite-a-long-word-7")
    assert json.loads(run("first_manager", "--code", "anna", "--json"))["link"] == ""
    assert Person.objects.get().check_password("quite-a-long-word-7")


@pytest.mark.usefixtures("no_terminal")
def test_a_second_manager_only_when_asked_for() -> None:
    run("first_manager", "--code", "anna")

    with pytest.raises(CommandError, match="has a manager already"):
        run("first_manager", "--code", "bert")
    run("first_manager", "--code", "bert", "--another")
    with pytest.raises(CommandError, match="signs in as BERT already"):
        run("first_manager", "--code", "bert", "--another")
    with pytest.raises(CommandError, match="is no code"):
        run("first_manager", "--code", "b b", "--another")
    with pytest.raises(CommandError, match="The code is missing"):
        run("first_manager", "--another")
    assert Person.objects.count() == 2


def test_a_reset_link_for_somebody() -> None:
    make.make_crew(code="ANNA")
    make.make_crew(code="GONE", is_active=False)

    assert run("reset_link", "anna").startswith("http://127.0.0.1:8000/password/")
    for code, words in (("nobody", "Nobody signs in as"), ("gone", "may not sign in")):
        with pytest.raises(CommandError, match=words):
            run("reset_link", code)


@pytest.mark.django_db(transaction=True)
def test_a_copy_of_the_book_comes_back(tmp_path: Path) -> None:
    bring_in(tmp_path)
    reading = Reading.objects.first()
    copy = tmp_path / "book.copy"

    assert "The book is copied to" in run("backup", str(copy))
    with pytest.raises(CommandError, match="exists already"):
        run("backup", str(copy))
    with pytest.raises(CommandError, match="holds people already"):
        run("restore", str(copy))
    call_command("flush", interactive=False, verbosity=0)
    assert "2\N{NO-BREAK SPACE}modules and 4\N{NO-BREAK SPACE}fittings" in run("restore", str(copy))

    assert Reading.objects.get(pk=reading.pk).read_at == reading.read_at  # type: ignore[union-attr]
    assert Person.objects.get(code="MAX").history.exists()
    Site.objects.create(code="NEXT")  # numbers go on where they were
    assert sorted(child.name for child in tmp_path.iterdir()) == ["book.copy", "fleet.zip"]


def test_what_is_no_copy_is_refused(tmp_path: Path) -> None:
    (tmp_path / "letter").write_text("dear")
    (tmp_path / "damaged").write_bytes(b"SQLite format 3\x00" + b"x" * 5000)
    (tmp_path / "dump").write_bytes(b"PGDMP" + b"x" * 5000)
    words = {
        "none": "is no file",
        "letter": "is no copy of a book",
        "damaged": "is damaged" if connection.vendor == "sqlite" else "on the embedded database",
        "dump": "is a copy of a book on PostgreSQL" if connection.vendor == "sqlite" else "could not do it",
    }
    for name, remedy in words.items():
        with pytest.raises(CommandError, match=remedy):
            run("restore", str(tmp_path / name))


def test_a_tool_that_is_not_installed(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(whole_book.shutil, "which", lambda tool: None)
    with pytest.raises(whole_book.CannotCopy, match="pg_dump is not installed"):
        whole_book.run_tool("pg_dump")


def test_updates_by_command(tmp_path: Path) -> None:
    bring_in(tmp_path)
    path = folder(tmp_path / "changed", sites=with_cell("sites", 2, "name", "Mill"))

    with pytest.raises(CommandError, match="choose “update”"):
        run("import_records", path)
    run("import_records", path, "--update")

    assert Site.objects.get(code="WEIR").name == "Mill"
    assert fleet()["sites"] == text("sites")
