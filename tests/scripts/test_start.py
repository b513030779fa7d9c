"""What a person is told when the program cannot start."""

from __future__ import annotations

import os
import socket
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent.parent
LONG_KEY = "a-key-of-ones-own-that-nobody-else-has-0123456789"


def start(folder: Path, *arguments: str, **variables: str) -> subprocess.CompletedProcess[str]:
    """Run the script with nothing of this test run's settings but what is given."""
    clean = {name: value for name, value in os.environ.items() if not name.startswith(("HALFNUT_", "DJANGO_"))}
    return subprocess.run(
        [sys.executable, "scripts/start.py", *arguments],
        cwd=ROOT,
        env={**clean, "HALFNUT_DATA": str(folder), "HALFNUT_STATIC": str(folder / "static"), **variables},
        stdin=subprocess.DEVNULL,
        capture_output=True,
        text=True,
        timeout=60,
    )


def free_port() -> str:
    with socket.socket() as trial:
        trial.bind(("127.0.0.1", 0))
        return str(trial.getsockname()[1])


def test_a_busy_port_is_named_with_another_to_take(tmp_path: Path) -> None:
    with socket.socket() as taken:
        taken.bind(("127.0.0.1", 0))
        taken.listen()
        port = taken.getsockname()[1]
        done = start(tmp_path, "--demo", PORT=str(port))
    assert done.returncode == 1
    assert done.stderr == (
        f"Port {port} on 127.0.0.1 cannot be used (address already in use). "
        f"Stop the program that has it, or choose another port: make run PORT={port + 1}\n"
    )
    assert not list(tmp_path.iterdir())


@pytest.mark.parametrize("port", ["eighty", "0", "65536", "-1"])
def test_a_port_that_is_none_is_quoted(tmp_path: Path, port: str) -> None:
    done = start(tmp_path, "--demo", PORT=port)
    assert done.returncode == 1
    assert f"PORT gives the address “127.0.0.1:{port}”" in done.stderr


@pytest.mark.parametrize(
    ("variables", "sentence"),
    [
        ({}, "HALFNUT_SECRET_KEY is missing"),
        ({"HALFNUT_SECRET_KEY": "short"}, "shorter than 40 characters"),
        ({"HALFNUT_SECRET_KEY": "halfnut-demo-key-never-for-a-real-book-0123456789"}, "or the demo's"),
        ({"HALFNUT_SECRET_KEY": LONG_KEY, "HALFNUT_DEBUG": "1"}, "HALFNUT_DEBUG is on"),
        ({"HALFNUT_SECRET_KEY": LONG_KEY, "HALFNUT_DATABASE_URL": "mysql://here/book"}, "use postgres://"),
        (
            {"HALFNUT_SECRET_KEY": LONG_KEY, "HALFNUT_DATABASE_URL": "postgres://nobody@127.0.0.1:1/book"},
            "The database cannot be used",
        ),
    ],
)
def test_a_real_start_says_what_is_wrong(tmp_path: Path, variables: dict[str, str], sentence: str) -> None:
    done = start(tmp_path, HALFNUT_BIND=f"127.0.0.1:{free_port()}", **variables)
    assert done.returncode == 1
    assert sentence in done.stderr
    assert "Traceback" not in done.stderr
    assert done.stderr.endswith("Halfnut was not started.\n")
    assert done.stdout == ""
