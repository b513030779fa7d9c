"""Makes the book ready to be opened: checks, migrations, static files and, for `--demo`, the demo fleet.

What it does goes to standard error as it happens; what people should know once the server is up, to standard output.
"""

from __future__ import annotations

import fcntl
import hashlib
import io
import os
import sys
import time
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent
sys.path.insert(0, str(ROOT))


class NotReady(Exception):
    """Something a person has to put right first; the text says what."""


def main(arguments: list[str]) -> int:
    demo = "--demo" in arguments
    os.environ["DJANGO_SETTINGS_MODULE"] = "config.settings"
    if not demo:
        os.environ["HALFNUT_REAL_START"] = "1"
    import django
    from django.core.exceptions import ImproperlyConfigured
    from django.core.management.base import SystemCheckError
    from django.db import DatabaseError
    from psycopg import OperationalError

    try:
        django.setup()
        from django.conf import settings

        settings.DATA_DIR.mkdir(parents=True, exist_ok=True)
        with (settings.DATA_DIR / "preparing.lock").open("w") as lock:
            fcntl.flock(lock, fcntl.LOCK_EX)  # a second start waits here instead of loading the demo a second time
            print(prepare(demo=demo))
    except (NotReady, ImproperlyConfigured, SystemCheckError) as reason:
        say(str(reason))
        return 1
    except (DatabaseError, OperationalError) as problem:
        say(f"The database cannot be used: {str(problem).strip()}")
        return 1
    except OSError as problem:
        say(f"{problem.filename or 'A file'} cannot be used: {problem.strerror}.")
        return 1
    return 0


def prepare(*, demo: bool) -> str:
    from django.core.management import call_command

    find_the_database()
    call_command("check", databases=["default"], stdout=io.StringIO(), no_color=True)  # what is wrong goes to stderr
    migrate()
    if not demo:
        refuse_demo_passwords()
    collect_static_files()
    return demo_notes() if demo else real_notes()


def find_the_database() -> None:
    """Ask once, directly: the pool would wait half a minute before it admits that nobody answers."""
    from django.db import connection

    if connection.vendor == "postgresql":
        import psycopg

        wanted = connection.settings_dict
        psycopg.connect(
            host=wanted["HOST"] or None,
            port=wanted["PORT"] or None,
            user=wanted["USER"] or None,
            password=wanted["PASSWORD"] or None,
            dbname=wanted["NAME"] or None,
            connect_timeout=10,
        ).close()


def migrate() -> None:
    from django.core.management import call_command
    from django.db import connection
    from django.db.migrations.executor import MigrationExecutor

    executor = MigrationExecutor(connection)
    if executor.migration_plan(executor.loader.graph.leaf_nodes()):
        say("Preparing the database.")
        call_command("migrate", interactive=False, verbosity=0)


def collect_static_files() -> None:
    """Copying and packing them takes seconds, so they are left alone while nothing in them has changed."""
    from django.conf import settings
    from django.contrib.staticfiles.finders import get_finders
    from django.core.management import call_command

    seen = hashlib.sha256()
    for finder in get_finders():
        for name, storage in sorted(finder.list([]), key=lambda found: found[0]):
            state = os.stat(storage.path(name))
            seen.update(f"{name} {state.st_size} {state.st_mtime_ns}\n".encode())
    stamp = Path(settings.STATIC_ROOT) / ".collected"
    if stamp.exists() and stamp.read_text() == seen.hexdigest():
        return
    say("Collecting the static files.")
    call_command("collectstatic", interactive=False, verbosity=0)
    stamp.write_text(seen.hexdigest())


def demo_notes() -> str:
    """Load the demo into an empty book, and list its people."""
    from django.core.management import call_command

    from fleet.demo.people import demo_people_table
    from fleet.models import Book, Person, Site

    if not Person.objects.exists() and not Site.objects.exists():
        say("Loading the demo fleet, this first time only.")
        began = time.monotonic()
        call_command("demo", stdout=io.StringIO())
        say(f"The demo fleet is loaded ({time.monotonic() - began:.0f} s).")
    if not Book.load().made_by_demo:
        return "The book found here was not made by the demo, so it has no demo people. Sign in as one of its own."
    return demo_people_table()


def refuse_demo_passwords() -> None:
    """Anybody can read the demo's passwords, so they must not open a book on a real server."""
    from fleet.demo.people import people_with_demo_passwords

    names = people_with_demo_passwords()
    if names:
        raise NotReady(
            f"This book was made by the demo, and its passwords are known to everybody: {', '.join(names)} can still "
            "sign in with them. Start with an empty database (HALFNUT_DATABASE_URL or HALFNUT_DATA), or set their "
            "passwords anew with manage.py changepassword."
        )


def real_notes() -> str:
    from fleet.models import Person

    if Person.objects.filter(is_active=True, role__in=["manager", "administrator"]).exists():
        return ""
    return "Nobody can manage this book yet. Make the first manager: .venv/bin/python manage.py first_manager --help"


def say(sentence: str) -> None:
    print(sentence, file=sys.stderr, flush=True)


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
