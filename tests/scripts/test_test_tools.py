"""Where nothing can be installed, a person reads what to install and the run stops with status 2."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent.parent
PRELUDE = """
import sys
sys.path.insert(0, "scripts")
from pathlib import Path
import subprocess, run_tests, test_tools, throwaway_postgresql
throwaway_postgresql.find_programs = lambda: None
test_tools.CHROMIUM = Path("not-there")
sys.argv = ["run_tests.py"]
"""


@pytest.mark.parametrize(
    ("world", "reason"),
    [
        ("test_tools.shutil.which = lambda name: None", "No apt-get here"),
        ("test_tools.root_prefix = lambda: None", "it takes root, or sudo without a password"),
        (
            "test_tools.root_prefix = lambda: []\n"
            "test_tools.shutil.which = lambda name: name\n"
            "failed = subprocess.CompletedProcess([], 100, '', 'no network')\n"
            "test_tools.subprocess.run = lambda *args, **kwargs: failed",
            "Trying it here failed for postgresql and chromium",
        ),
    ],
)
def test_what_to_install_is_said_exactly(world: str, reason: str) -> None:
    code = f"{PRELUDE}\n{world}\nsys.exit(run_tests.main())"
    done = subprocess.run([sys.executable, "-c", code], cwd=ROOT, capture_output=True, text=True, timeout=60)
    assert done.returncode == 2
    assert "Install: apt-get install postgresql chromium" in done.stderr
    assert reason in done.stderr
