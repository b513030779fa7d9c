"""What every test may count on: an engine, a browser that stays at home, and no waiting at the sign-in lock.

The database is a throwaway SQLite file, or the PostgreSQL server that HALFNUT_DATABASE_URL names.
"""

from __future__ import annotations

import os
import shutil
from collections.abc import Callable, Iterator
from itertools import groupby
from typing import Any
from urllib.parse import urlsplit

import hypothesis
import pytest
from django.conf import settings

from tests import emptied, migrated

CHROMIUM = "/usr/bin/chromium"
# Playwright's own event loop would make Django refuse every query in a browser test.
os.environ.setdefault("DJANGO_ALLOW_ASYNC_UNSAFE", "1")

# The same cases in every run: what passed here passes there. HALFNUT_EXPLORE=1 looks for new ones.
hypothesis.settings.register_profile(
    "halfnut", deadline=None, derandomize=not os.environ.get("HALFNUT_EXPLORE"), print_blob=True
)
hypothesis.settings.load_profile("halfnut")


def on_postgresql() -> bool:
    return settings.DATABASES["default"]["ENGINE"].endswith("postgresql")


def pytest_report_header() -> str:
    return f"engine: {'PostgreSQL' if on_postgresql() else 'SQLite, a file'}"


@pytest.hookimpl(tryfirst=True)  # before the marks choose
def pytest_collection_modifyitems(items: list[pytest.Item]) -> None:
    only_postgresql = pytest.mark.skip(
        reason="needs writers side by side, and SQLite lets in one at a time: `make test` runs it on PostgreSQL"
    )
    no_browser = pytest.mark.skip(reason=f"no {CHROMIUM}: apt-get install chromium")
    # in each file those that share rows come last: the others must not see them
    files = groupby(list(items), key=lambda item: item.path)
    items[:] = [item for _, group in files for item in sorted(group, key=shares_rows)]
    for item in items:
        if uses_database(item):
            item.add_marker(pytest.mark.database)
        if item.get_closest_marker("postgres") and not on_postgresql():
            item.add_marker(only_postgresql)
        if item.get_closest_marker("browser") and not os.path.exists(CHROMIUM):
            item.add_marker(no_browser)


def shares_rows(item: pytest.Item) -> bool:
    return "made_once" in getattr(item, "fixturenames", ())


def uses_database(item: pytest.Item) -> bool:
    fixtures = getattr(item, "fixturenames", ())
    return any(map(item.get_closest_marker, ("django_db", "postgres"))) or not {"db", "transactional_db"}.isdisjoint(
        fixtures
    )


def pytest_unconfigure() -> None:
    if settings.configured and hasattr(settings, "TEST_FOLDER"):
        shutil.rmtree(settings.TEST_FOLDER, ignore_errors=True)


@pytest.fixture(scope="session")
def django_db_modify_db_settings(django_db_modify_db_settings_parallel_suffix: None) -> None:
    """The test database begins as a copy of one that is migrated already; what is newer is still migrated."""
    from django.db import connection

    migrated.use_for(connection.settings_dict)
    if on_postgresql():
        emptied.install()


@pytest.fixture(scope="session")
def django_db_keepdb(request: pytest.FixtureRequest) -> bool:
    """On SQLite the copy is kept as it is; its folder goes with the process."""
    return not on_postgresql() or bool(request.config.getvalue("reuse_db"))


@pytest.fixture(scope="module", autouse=True)
def swept(request: pytest.FixtureRequest) -> Iterator[None]:
    """After the last test of a file, and after its shared rows were taken back."""
    here = [item for item in request.session.items if item.path == request.path]
    if not (on_postgresql() and any(map(uses_database, here))):
        yield
        return
    blocker = request.getfixturevalue("django_db_blocker")
    request.getfixturevalue("django_db_setup")
    yield
    with blocker.unblock():
        emptied.sweep()


@pytest.fixture(scope="module")
def made_once(
    swept: None, django_db_setup: None, django_db_blocker: Any
) -> Iterator[Callable[[Callable[[], Any]], Any]]:
    """Calls what makes a fleet, whose rows then stand for all tests of a file; each takes back what it changed.

    For fleets that take a second to make, in a fixture of scope "module". Tests take a `copy.deepcopy` of its Python
    objects. Not in a file with tests that commit.
    """
    from django.db import connection, transaction

    def make(build: Callable[[], Any]) -> Any:
        with django_db_blocker.unblock():
            return build()

    whole_file = transaction.atomic()
    with pytest.MonkeyPatch.context() as patched:
        make(whole_file.__enter__)
        # Django closes the connection after each test, and the rows would go with it
        patched.setattr(connection, "close", lambda: None)
        yield make
        make(lambda: transaction.set_rollback(True))
        make(lambda: whole_file.__exit__(None, None, None))


@pytest.fixture(scope="session")
def browser_type_launch_args(browser_type_launch_args: dict[str, Any]) -> dict[str, Any]:
    """Debian's Chromium, kept from calling home."""
    quiet = [
        "--disable-background-networking",
        "--disable-component-update",
        "--disable-default-apps",
        "--disable-domain-reliability",
        "--disable-sync",
        "--no-first-run",
        "--metrics-recording-only",
    ]
    if os.geteuid() == 0:
        quiet.append("--no-sandbox")  # Chromium refuses its sandbox to root
    return {**browser_type_launch_args, "executable_path": CHROMIUM, "args": quiet}


@pytest.fixture(scope="session")
def browser_context_args(browser_context_args: dict[str, Any]) -> dict[str, Any]:
    return {**browser_context_args, "locale": "en-GB", "timezone_id": "Europe/London"}


@pytest.fixture
def context(context: Any) -> Iterator[Any]:
    """A browser context that fails its test for any outside address, script error or breach of the content policy."""
    complaints: list[str] = []

    def watch_request(request: Any) -> None:
        address = urlsplit(request.url)
        if address.scheme in {"http", "https", "ws", "wss"} and address.hostname not in {"localhost", "127.0.0.1"}:
            complaints.append(f"asked an outside address: {request.url}")

    def watch_console(message: Any) -> None:
        if "Content Security Policy" in message.text:
            complaints.append(f"breached the content policy: {message.text}")

    context.on("request", watch_request)
    context.on("console", watch_console)
    context.on("weberror", lambda error: complaints.append(f"script error: {error.error}"))
    yield context
    assert not complaints, "\n".join(complaints)
