"""The program's own settings, told that a test run is going on and kept away from the book in `data/`."""

from __future__ import annotations

import atexit
import os
import shutil
import tempfile


def remove_own(folder: str, owner: int) -> None:
    """Not from a fork, which would take the folder from under its parent."""
    if os.getpid() == owner:
        shutil.rmtree(folder, ignore_errors=True)


# Each process of a parallel run reads this file, and so gets a folder of its own. tests/conftest.py removes it at the
# end of a run; a process that a test started removes its own.
TEST_FOLDER = tempfile.mkdtemp(prefix="halfnut-tests-")
atexit.register(remove_own, TEST_FOLDER, os.getpid())
os.environ["HALFNUT_TESTING"] = "1"
os.environ["HALFNUT_DATA"] = TEST_FOLDER
os.environ.setdefault("HALFNUT_TEST_DATABASE", os.path.join(TEST_FOLDER, "test.sqlite3"))
for name in ("HALFNUT_DEMO", "HALFNUT_DEBUG", "HALFNUT_REAL_START", "HALFNUT_BEHIND_TLS", "HALFNUT_HOSTS"):
    os.environ.pop(name, None)

from config.settings import *  # noqa: E402, F403
