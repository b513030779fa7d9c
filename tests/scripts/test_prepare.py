"""Who may sign in to a book that starts for real, and what a second start need not do again."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
from django.core import management

from fleet.demo.people import PEOPLE
from fleet.models import Person
from scripts import prepare


def demo_person(password: str, **fields: Any) -> Person:
    known = PEOPLE[0]
    return Person.objects.create_user(
        known.code, password, name=known.name, role=known.role, all_sites=True, made_by_demo=True, **fields
    )


@pytest.mark.django_db
def test_a_demo_password_keeps_a_real_start_from_happening() -> None:
    person = demo_person(PEOPLE[0].password)
    with pytest.raises(prepare.NotReady, match=f"known to everybody: {person.code} can still sign in"):
        prepare.refuse_demo_passwords()


@pytest.mark.django_db
def test_a_password_of_ones_own_or_a_closed_door_is_fine() -> None:
    person = demo_person("a password of my own")
    prepare.refuse_demo_passwords()
    person.set_password(PEOPLE[0].password)
    person.is_active = False
    person.save()
    prepare.refuse_demo_passwords()


@pytest.mark.django_db
def test_a_book_without_a_manager_says_how_to_make_one() -> None:
    assert "manage.py first_manager" in prepare.real_notes()
    demo_person("a password of my own")
    assert prepare.real_notes() == ""


@pytest.mark.django_db
def test_the_demo_is_loaded_into_an_empty_book_only(monkeypatch: pytest.MonkeyPatch) -> None:
    called: list[str] = []
    monkeypatch.setattr(management, "call_command", lambda name, **options: called.append(name))
    prepare.demo_notes()
    assert called == ["demo"]
    demo_person("a password of my own")
    assert "not made by the demo" in prepare.demo_notes()
    assert called == ["demo"]


def test_static_files_are_packed_again_only_when_they_changed(
    tmp_path: Path, settings: Any, monkeypatch: pytest.MonkeyPatch
) -> None:
    source = tmp_path / "source"
    source.mkdir()
    (source / "a.css").write_text("a { }")
    settings.STATICFILES_DIRS = [source]
    settings.STATIC_ROOT = tmp_path / "packed"
    settings.STATIC_ROOT.mkdir()
    called: list[str] = []
    monkeypatch.setattr(management, "call_command", lambda name, **options: called.append(name))
    prepare.collect_static_files()
    prepare.collect_static_files()
    assert called == ["collectstatic"]
    (source / "a.css").write_text("a { color: red }")
    prepare.collect_static_files()
    assert called == ["collectstatic", "collectstatic"]
