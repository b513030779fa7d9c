"""A migrated, empty database to copy: migrating takes nine seconds of processor time, and each process of a test run
needs one. It is made again whenever what it is made from has changed."""

from __future__ import annotations

import fcntl
import hashlib
import os
import shutil
import subprocess
import sys
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any
from urllib.parse import urlsplit, urlunsplit

ROOT = Path(__file__).resolve().parent.parent
FOLDER = ROOT / ".test-databases"
MADE_FROM = ("fleet/migrations", "fleet/models", "reliability/migrations", "reliability/models")
ALSO = ("config/settings.py", "config/sqlite.py", "requirements.txt")
POSTGRESQL_NAME = "halfnut_migrated"


def use_for(database: dict[str, Any]) -> None:
    """Lets the test database of these settings begin as a copy."""
    key = key_of_sources()
    with one_at_a_time():
        if database["ENGINE"].endswith("postgresql"):
            make_on_postgresql(database, key)
            database["TEST"]["TEMPLATE"] = POSTGRESQL_NAME
        else:
            shutil.copyfile(made_as_file(key), database["TEST"]["NAME"])


def key_of_sources() -> str:
    files = [path for folder in MADE_FROM for path in sorted((ROOT / folder).glob("*.py"))]
    found = hashlib.sha256(sys.version.encode())
    for path in [*files, *(ROOT / name for name in ALSO)]:
        if path.exists():
            found.update(str(path.relative_to(ROOT)).encode() + b"\0" + path.read_bytes() + b"\0")
    return found.hexdigest()[:20]


@contextmanager
def one_at_a_time() -> Iterator[None]:
    """Processes of one run come here together: the first makes it, the others copy."""
    FOLDER.mkdir(exist_ok=True)
    with (FOLDER / "lock").open("w") as lock:
        fcntl.flock(lock, fcntl.LOCK_EX)
        yield


def made_as_file(key: str) -> Path:
    wanted = FOLDER / f"{key}.sqlite3"
    if wanted.exists():
        return wanted
    with tempfile.TemporaryDirectory(dir=FOLDER) as folder:
        migrate(HALFNUT_DATA=folder, HALFNUT_DATABASE_URL="")
        made = Path(folder) / "halfnut.sqlite3"
        if made.with_name(made.name + "-wal").exists():
            raise RuntimeError("The migrated database was left with an unwritten log, and cannot be copied.")
        for old in FOLDER.glob("*.sqlite3"):
            old.unlink()
        made.rename(wanted)
    return wanted


def make_on_postgresql(database: dict[str, Any], key: str) -> None:
    """On the server itself, which copies it file by file; its comment says what it was made from."""
    import psycopg

    server = {"host": database["HOST"], "port": database["PORT"], "user": database["USER"]}
    with psycopg.connect(**server, password=database["PASSWORD"], dbname=database["NAME"], autocommit=True) as asked:
        says = "SELECT shobj_description(oid, 'pg_database') FROM pg_database WHERE datname = %s"
        if asked.execute(says, [POSTGRESQL_NAME]).fetchone() == (key,):
            return
        asked.execute(f"DROP DATABASE IF EXISTS {POSTGRESQL_NAME}")
        asked.execute(f"CREATE DATABASE {POSTGRESQL_NAME} TEMPLATE template0")
        address = urlsplit(os.environ["HALFNUT_DATABASE_URL"])
        migrate(HALFNUT_DATABASE_URL=urlunsplit(address._replace(path=f"/{POSTGRESQL_NAME}")))
        asked.execute(f"COMMENT ON DATABASE {POSTGRESQL_NAME} IS '{key}'")


def migrate(**settings: str) -> None:
    subprocess.run(
        [sys.executable, "manage.py", "migrate", "--verbosity=0"],
        cwd=ROOT,
        env={**os.environ, "DJANGO_SETTINGS_MODULE": "config.settings", "HALFNUT_TESTING": "1", **settings},
        check=True,
    )
