"""The supervisor with two stand-ins that write down their process numbers."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

from scripts.supervise import describe_end
from tests.scripts.processes import alive, lines, wait_until

ROOT = Path(__file__).resolve().parent.parent.parent
# Each stand-in appends its process number and stays until it is told to stop; `stubborn` does not listen.
STAND_IN = """
import os, pathlib, signal, sys
path, stubborn = pathlib.Path(sys.argv[1]), sys.argv[2] == "stubborn"
if stubborn:
    signal.signal(signal.SIGTERM, signal.SIG_IGN)
with path.open("a") as file:
    file.write(f"{os.getpid()}\\n")
while True:
    signal.pause()
"""
RUN = """
import sys
sys.path.insert(0, "scripts")
import supervise
supervise.TIME_TO_FINISH = float(sys.argv[3])
command = lambda path: [sys.executable, "-c", sys.argv[4], path, sys.argv[5]]
charges = {"web server": command(sys.argv[1]), "background worker": command(sys.argv[2])}
sys.exit(supervise.Supervisor(charges).run())
"""


class Watched:
    """A supervisor in a process of its own, and what its two charges wrote."""

    def __init__(self, folder: Path, kind: str = "obedient", time_to_finish: float = 15) -> None:
        self.web, self.worker = folder / "web", folder / "worker"
        arguments = [str(self.web), str(self.worker), str(time_to_finish), STAND_IN, kind]
        self.process = subprocess.Popen(
            [sys.executable, "-c", RUN, *arguments], cwd=ROOT, stdout=subprocess.PIPE, text=True
        )
        wait_until(lambda: bool(lines(self.web) and lines(self.worker)), "both stand-ins had started")

    def pids(self) -> list[int]:
        return [int(pid) for pid in (*lines(self.web), *lines(self.worker))]

    def all_gone(self) -> bool:
        return not any(alive(pid) for pid in self.pids())


@pytest.fixture
def folder(tmp_path: Path) -> Iterator[Path]:
    yield tmp_path
    for path in (tmp_path / "web", tmp_path / "worker"):
        for pid in lines(path):
            if alive(int(pid)):
                os.kill(int(pid), signal.SIGKILL)


@pytest.mark.parametrize("which", ["web", "worker"])
def test_the_one_that_dies_is_started_again_and_the_other_left_alone(folder: Path, which: str) -> None:
    watched = Watched(folder)
    dying = watched.web if which == "web" else watched.worker
    other = watched.worker if which == "web" else watched.web
    os.kill(int(lines(dying)[0]), signal.SIGKILL)
    wait_until(lambda: len(lines(dying)) == 2, "it was started again")
    assert len(lines(other)) == 1
    assert alive(int(lines(other)[0]))
    watched.process.terminate()
    said, _ = watched.process.communicate(timeout=20)
    name = "web server" if which == "web" else "background worker"
    assert f"The {name} stopped by itself (ended by SIGKILL)" in said


@pytest.mark.parametrize("number", [signal.SIGTERM, signal.SIGINT])
def test_both_stop_when_it_is_told_to(folder: Path, number: signal.Signals) -> None:
    watched = Watched(folder)
    watched.process.send_signal(number)
    watched.process.communicate(timeout=20)
    assert watched.process.returncode == 0
    assert watched.all_gone()
    assert len(watched.pids()) == 2


def test_the_deaf_are_ended_after_their_time(folder: Path) -> None:
    watched = Watched(folder, kind="stubborn", time_to_finish=0.3)
    watched.process.terminate()
    said, _ = watched.process.communicate(timeout=20)
    assert "The background worker did not finish in time and was ended." in said
    assert watched.all_gone()


def test_a_second_stop_does_not_wait(folder: Path) -> None:
    watched = Watched(folder, kind="stubborn", time_to_finish=3600)
    watched.process.terminate()
    watched.process.send_signal(signal.SIGINT)
    watched.process.communicate(timeout=20)
    assert watched.all_gone()


@pytest.mark.skipif(sys.platform != "linux", reason="only Linux can tie a process to its parent's life")
def test_nothing_outlives_a_supervisor_that_is_killed(folder: Path) -> None:
    watched = Watched(folder)
    watched.process.kill()
    watched.process.wait(timeout=20)
    wait_until(watched.all_gone, "both stand-ins had stopped")
    watched.process.communicate(timeout=20)


def test_the_end_of_a_process_is_said_in_words() -> None:
    assert describe_end(-signal.SIGTERM) == "ended by SIGTERM"
    assert describe_end(3) == "exit status 3"
