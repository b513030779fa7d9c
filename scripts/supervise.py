"""Keeps the web server and the background worker running until it is told to stop.

Standard library only, so that it can be read, and trusted, without knowing anything else of the program.
"""

from __future__ import annotations

import ctypes
import signal
import subprocess
import sys
import time
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from types import FrameType

SHORTEST_PAUSE = 0.5  # seconds before a process that died is started again
LONGEST_PAUSE = 30.0
SETTLED_AFTER = 20.0  # seconds of life after which the next death counts as the first
TIME_TO_FINISH = 30.0  # seconds a process gets to finish what it has in hand
LOOK_EVERY = 0.1
PR_SET_PDEATHSIG = 1


def _die_with_the_supervisor() -> None:
    """Ask the kernel to stop this process if the supervisor is killed outright."""
    ctypes.CDLL(None).prctl(PR_SET_PDEATHSIG, signal.SIGTERM)


@dataclass
class Charge:
    """One process in the supervisor's care."""

    name: str
    command: Sequence[str]
    process: subprocess.Popen[bytes] | None = None
    started_at: float = 0.0
    pause: float = SHORTEST_PAUSE
    start_again_at: float | None = field(default=0.0)

    def start(self, environment: Mapping[str, str] | None) -> None:
        # A session of its own: Ctrl-C in the terminal reaches the supervisor alone, which then stops both in order.
        self.process = subprocess.Popen(
            self.command,
            env=environment,
            stdin=subprocess.DEVNULL,
            start_new_session=True,
            preexec_fn=_die_with_the_supervisor if sys.platform == "linux" else None,
        )
        self.started_at = time.monotonic()
        self.start_again_at = None

    @property
    def running(self) -> bool:
        return self.process is not None and self.process.poll() is None


class Supervisor:
    """Starts its charges, restarts whichever dies, stops all of them on SIGTERM or SIGINT."""

    def __init__(
        self,
        charges: Mapping[str, Sequence[str]],
        environment: Mapping[str, str] | None = None,
        say: Callable[[str], None] | None = None,
    ) -> None:
        self.charges = [Charge(name, command) for name, command in charges.items()]
        self.environment = environment
        self.say = say or (lambda sentence: print(sentence, flush=True))
        self.times_asked_to_stop = 0

    def run(self, when_up: Callable[[], bool] | None = None, on_up: Callable[[], None] | None = None) -> int:
        """Stay until asked to stop; call `on_up` once, when `when_up` first answers True."""
        earlier = {number: signal.signal(number, self._asked_to_stop) for number in (signal.SIGTERM, signal.SIGINT)}
        waiting_for_up = when_up is not None
        try:
            while not self.times_asked_to_stop:
                self._start_what_is_due()
                self._notice_deaths()
                if waiting_for_up and when_up is not None and when_up():
                    waiting_for_up = False
                    if on_up is not None:
                        on_up()
                time.sleep(LOOK_EVERY)
        finally:
            self._stop_all()
            for number, handler in earlier.items():
                signal.signal(number, handler)
        return 0

    def _asked_to_stop(self, number: int, frame: FrameType | None) -> None:
        self.times_asked_to_stop += 1

    def _start_what_is_due(self) -> None:
        for charge in self.charges:
            if charge.start_again_at is not None and time.monotonic() >= charge.start_again_at:
                charge.start(self.environment)

    def _notice_deaths(self) -> None:
        now = time.monotonic()
        for charge in self.charges:
            if charge.process is None or charge.start_again_at is not None or charge.running:
                continue
            lived = now - charge.started_at
            charge.pause = SHORTEST_PAUSE if lived >= SETTLED_AFTER else min(charge.pause * 2, LONGEST_PAUSE)
            charge.start_again_at = now + charge.pause
            self.say(
                f"The {charge.name} stopped by itself ({describe_end(charge.process.returncode)}). "
                f"It is started again in {charge.pause:.0f} s."
            )

    def _stop_all(self) -> None:
        running = [charge for charge in self.charges if charge.running]
        for charge in running:
            assert charge.process is not None
            charge.process.terminate()
        give_up_at = time.monotonic() + TIME_TO_FINISH
        while any(charge.running for charge in running):
            # A second Ctrl-C means that the person does not want to wait for work in hand.
            if time.monotonic() > give_up_at or self.times_asked_to_stop > 1:
                for charge in running:
                    if charge.running and charge.process is not None:
                        self.say(f"The {charge.name} did not finish in time and was ended.")
                        charge.process.kill()
                        charge.process.wait()
                return
            time.sleep(LOOK_EVERY / 2)


def describe_end(status: int) -> str:
    """Say how a process ended, in words."""
    if status < 0:
        return f"ended by {signal.Signals(-status).name}"
    return f"exit status {status}"
