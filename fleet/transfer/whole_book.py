"""A copy of the whole book while people work, and a copy put back into an empty book. Each engine has its own form."""

from __future__ import annotations

import os
import shutil
import subprocess
from pathlib import Path
from typing import Any

from django.db import DatabaseError, connection
from django.db.migrations.loader import MigrationLoader

from fleet.models import Component, LifeSet, Module, ModuleType, Part, Person, Site, Visit

HELD = {
    "people": Person,
    "sites": Site,
    "components": Component,
    "module types": ModuleType,
    "parts": Part,
    "modules": Module,
    "visits": Visit,
    "sets of lives": LifeSet,
}
SQLITE_HEAD = b"SQLite format 3\x00"
POSTGRESQL_HEAD = b"PGDMP"
OTHER_ENGINE = (
    "This is a copy of a book on {theirs}, and this book is on {ours}. "
    "Take the records over with export_records and import_records instead."
)


class CannotCopy(Exception):
    """A copy that cannot be made or put back; the text says what to do."""


def back_up(path: Path) -> None:
    """Writes beside the path first, so that a copy under its own name is always whole."""
    if path.exists():
        raise CannotCopy(f"{path} exists already. Give a new name, or move it away.")
    if not path.parent.is_dir():
        raise CannotCopy(f"The folder {path.parent} does not exist. Make it first.")
    part = path.with_name(f".{path.name}.part")
    part.unlink(missing_ok=True)
    try:
        (copy_sqlite if connection.vendor == "sqlite" else copy_postgresql)(part)
        with part.open("rb") as written:
            os.fsync(written.fileno())
        part.replace(path)
    finally:
        part.unlink(missing_ok=True)


def copy_sqlite(target: Path) -> None:
    """Reads one moment of the book; writers are not held up (sqlite.org/lang_vacuum.html#vacuuminto)."""
    with connection.cursor() as cursor:
        cursor.execute("VACUUM INTO %s", [str(target)])
    check_sqlite(target)


def copy_postgresql(target: Path) -> None:
    run_tool("pg_dump", "--format=custom", "--no-owner", "--no-privileges", f"--file={target}")


def put_back(path: Path) -> None:
    """Only into a book that holds nothing; leaves it as if nothing had happened where the copy is damaged."""
    if not path.is_file():
        raise CannotCopy(f"{path} is no file. Give the path of a copy made by backup.")
    refuse_full_book()
    with path.open("rb") as copy:
        head = copy.read(16)
    sqlite = connection.vendor == "sqlite"
    if head.startswith(POSTGRESQL_HEAD if sqlite else SQLITE_HEAD):
        names = ("PostgreSQL", "the embedded database")
        theirs, ours = names if sqlite else reversed(names)
        raise CannotCopy(OTHER_ENGINE.format(theirs=theirs, ours=ours))
    if not head.startswith(SQLITE_HEAD if sqlite else POSTGRESQL_HEAD):
        raise CannotCopy(f"{path} is no copy of a book. Give the path of a copy made by backup.")
    if sqlite:
        restore_sqlite(path)
    else:
        restore_postgresql(path)


def refuse_full_book() -> None:
    tables = set(connection.introspection.table_names())
    for words, model in HELD.items():
        if model._meta.db_table in tables and model._default_manager.exists():
            raise CannotCopy(f"This book holds {words} already. Put the copy back into an empty book.")


def restore_sqlite(path: Path) -> None:
    from sqlite3 import connect  # the newer one, where it is installed

    check_sqlite(path)
    refuse_later_version(path)
    source = connect(f"file:{path}?mode=ro", uri=True)
    try:
        connection.ensure_connection()
        source.backup(connection.connection)
    finally:
        source.close()
        connection.close()


def check_sqlite(path: Path) -> None:
    from sqlite3 import DatabaseError as Damaged
    from sqlite3 import connect

    copy = connect(f"file:{path}?mode=ro", uri=True)
    try:
        answer = copy.execute("PRAGMA quick_check").fetchone()[0]
        held = copy.execute("SELECT COUNT(*) FROM sqlite_master WHERE name = 'fleet_person'").fetchone()[0]
    except Damaged as fault:
        raise CannotCopy(f"{path.name} is damaged ({fault}). Take another copy.") from None
    finally:
        copy.close()
    if answer != "ok":
        raise CannotCopy(f"{path.name} is damaged ({answer}). Take another copy.")
    if not held:
        raise CannotCopy(f"{path.name} is a database, but no book. Give the path of a copy made by backup.")


def refuse_later_version(path: Path) -> None:
    from sqlite3 import connect

    copy = connect(f"file:{path}?mode=ro", uri=True)
    try:
        theirs = set(copy.execute("SELECT app, name FROM django_migrations").fetchall())
    finally:
        copy.close()
    loader = MigrationLoader(connection)
    replaced = {step for migration in loader.disk_migrations.values() for step in migration.replaces}
    unknown = {step for step in theirs if step[0] in {"fleet", "reliability"}} - set(loader.disk_migrations) - replaced
    if unknown:
        raise CannotCopy(f"{path.name} was made by a later version of the program. Install that version first.")


def restore_postgresql(path: Path) -> None:
    if "fleet_person" not in run_tool("pg_restore", "--list", str(path), with_database=False):
        raise CannotCopy(f"{path.name} is a copy of a database, but of no book. Give a copy made by backup.")
    connection.close()
    run_tool(
        "pg_restore", "--clean", "--if-exists", "--no-owner", "--no-privileges", "--single-transaction",
        "--exit-on-error", f"--dbname={database_name()}", str(path), with_database=False,
    )  # fmt: skip


def database_name() -> str:
    return str(connection.settings_dict["NAME"])


def run_tool(tool: str, *arguments: str, with_database: bool = True) -> str:
    """PostgreSQL's own tools, which know how to copy one moment of a database; the password goes by the environment."""
    program = shutil.which(tool)
    if program is None:
        raise CannotCopy(f"{tool} is not installed. Install PostgreSQL's client programs, of the server's version.")
    settings_of: dict[str, Any] = connection.settings_dict
    environment = dict(os.environ)
    for name, key in (("PGHOST", "HOST"), ("PGPORT", "PORT"), ("PGUSER", "USER"), ("PGPASSWORD", "PASSWORD")):
        if settings_of.get(key):
            environment[name] = str(settings_of[key])
    database = [f"--dbname={database_name()}"] if with_database else []
    done = subprocess.run([program, *database, *arguments], env=environment, capture_output=True, text=True)
    if done.returncode:
        raise CannotCopy(f"{tool} could not do it: {done.stderr.strip()[:600]}")
    return done.stdout


def make_current() -> None:
    """A copy of an earlier version is brought up to this one."""
    from django.core.management import call_command

    try:
        call_command("migrate", interactive=False, verbosity=0)
    except DatabaseError as fault:
        raise CannotCopy(f"The copy is back, but could not be brought up to date: {fault}") from fault
