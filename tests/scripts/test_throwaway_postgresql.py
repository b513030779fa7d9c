"""The server for the tests is there while it is needed and leaves nothing behind."""

from __future__ import annotations

import signal
import subprocess
import sys
from pathlib import Path

import pytest

from scripts.throwaway_postgresql import find_programs
from tests.scripts.processes import alive, wait_until

ROOT = Path(__file__).resolve().parent.parent.parent
SCRIPT = [sys.executable, "scripts/throwaway_postgresql.py"]
# Prints where the server keeps its data and its process number, then does as it is told.
LOOK = """
import os, sys, psycopg
with psycopg.connect(os.environ["HALFNUT_DATABASE_URL"]) as connection:
    folder = connection.execute("show data_directory").fetchone()[0]
print(folder, open(folder + "/postmaster.pid").readline().strip(), flush=True)
{then}
"""

pytestmark = pytest.mark.skipif(
    find_programs() is None, reason="PostgreSQL's server programs are not installed: apt-get install postgresql"
)


def begin(then: str) -> tuple[subprocess.Popen[str], Path, int]:
    process = subprocess.Popen(
        [*SCRIPT, sys.executable, "-c", LOOK.format(then=then)], cwd=ROOT, stdout=subprocess.PIPE, text=True
    )
    assert process.stdout is not None
    folder, pid = process.stdout.readline().split()
    return process, Path(folder), int(pid)


@pytest.mark.parametrize("status", [0, 3])
def test_it_is_gone_after_the_command_and_the_status_is_the_commands(status: int) -> None:
    process, folder, pid = begin(f"sys.exit({status})")
    process.communicate(timeout=30)
    assert process.returncode == status
    assert not alive(pid)
    assert not folder.parent.exists()


def test_it_is_gone_after_a_stop_from_outside() -> None:
    process, folder, pid = begin("import signal; signal.pause()")
    assert alive(pid)
    process.send_signal(signal.SIGTERM)
    process.communicate(timeout=30)
    assert not alive(pid)
    assert not folder.parent.exists()


@pytest.mark.skipif(sys.platform != "linux", reason="only Linux can tie a process to its parent's life")
def test_even_a_killed_run_leaves_no_server() -> None:
    process, folder, pid = begin("sys.stdin.close()")
    process.kill()
    process.wait(timeout=20)
    wait_until(lambda: not alive(pid), "the server had stopped")
    process.communicate(timeout=20)
    subprocess.run(["rm", "-rf", str(folder.parent)], check=True)


def test_without_a_command_it_says_how_it_is_used() -> None:
    done = subprocess.run(SCRIPT, cwd=ROOT, capture_output=True, text=True)
    assert done.returncode == 2
    assert done.stderr.startswith("Usage: throwaway_postgresql.py COMMAND")
