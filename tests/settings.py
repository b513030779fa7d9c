"""The program's own settings, told that a test run is going on and kept away from the book in `data/`."""

from __future__ import annotations

import os
import tempfile

# Each process of a parallel run reads this file, and so gets a folder of its own; tests/conftest.py removes it.
TEST_FOLDER = tempfile.mkdtemp(prefix="halfnut-tests-")
os.environ["HALFNUT_TESTING"] = "1"
os.environ["HALFNUT_DATA"] = TEST_FOLDER
os.environ.setdefault("HALFNUT_TEST_DATABASE", os.path.join(TEST_FOLDER, "test.sqlite3"))
for name in ("HALFNUT_DEMO", "HALFNUT_DEBUG", "HALFNUT_REAL_START", "HALFNUT_BEHIND_TLS", "HALFNUT_HOSTS"):
    os.environ.pop(name, None)

from config.settings import *  # noqa: E402, F403
