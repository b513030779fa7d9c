"""Starts Halfnut: `start.py --demo` is `make run`, `start.py` alone is `make start`.

Prepares the database and the static files, then hands over to the supervisor, which keeps web and worker running.
"""

from __future__ import annotations

import argparse
import http.client
import os
import socket
import subprocess
import sys
from pathlib import Path

from supervise import Supervisor

ROOT = Path(__file__).resolve().parent.parent
DEMO_HOST = "127.0.0.1"


class CannotStart(Exception):
    """Something a person has to put right first; the text says what."""


def main() -> int:
    parser = argparse.ArgumentParser(description="Start Halfnut: web server and background worker.")
    parser.add_argument("--demo", action="store_true", help="with the demo fleet, on this machine only")
    options = parser.parse_args()
    try:
        host, port = address(demo=options.demo)
        refuse_a_busy_port(host, port, demo=options.demo)
        environment = environment_for(host, port, demo=options.demo)
        notes = prepare(environment, demo=options.demo)
    except CannotStart as reason:
        print(reason, file=sys.stderr)
        return 1
    except KeyboardInterrupt:
        return 130
    supervisor = Supervisor(commands(), environment)
    return supervisor.run(
        when_up=lambda: answers(host, port),
        on_up=lambda: print(welcome(host, port, notes, demo=options.demo), flush=True),
    )


def address(*, demo: bool) -> tuple[str, int]:
    """The demo listens on this machine alone; a real start says where in HALFNUT_BIND, or takes PORT too."""
    bind = f"{DEMO_HOST}:{os.environ.get('PORT') or 8000}"
    name = "PORT"
    if not demo and os.environ.get("HALFNUT_BIND"):
        bind, name = os.environ["HALFNUT_BIND"], "HALFNUT_BIND"
    host, _, port = bind.rpartition(":")
    if not host or not port.isdecimal() or not 0 < int(port) < 65536:
        raise CannotStart(f"{name} gives the address “{bind}”. It has to be like 127.0.0.1:8000, the port below 65536.")
    return host, int(port)


def refuse_a_busy_port(host: str, port: int, *, demo: bool) -> None:
    """Find out before a minute of preparation, not after it."""
    with socket.socket(socket.AF_INET6 if ":" in host else socket.AF_INET) as trial:
        # As the server itself does: the remains of a server that just stopped are no obstacle.
        trial.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
        try:
            trial.bind((host.strip("[]"), port))
        except OSError as problem:
            other = "make run PORT=" if demo else "HALFNUT_BIND=" + host + ":"
            raise CannotStart(
                f"Port {port} on {host} cannot be used ({(problem.strerror or 'not allowed').lower()}). "
                f"Stop the program that has it, or choose another port: {other}{port + 1}"
            ) from None


def environment_for(host: str, port: int, *, demo: bool) -> dict[str, str]:
    """What the web server, the worker and the preparation see."""
    environment = dict(os.environ, HALFNUT_BIND=f"{host}:{port}", PYTHONUNBUFFERED="1")
    # Pages work on small arrays; threads inside the linear algebra would only fight the server's own.
    environment.setdefault("OPENBLAS_NUM_THREADS", "1")
    if demo:
        environment["HALFNUT_DEMO"] = "1"
    else:
        environment.pop("HALFNUT_DEMO", None)
    return environment


def prepare(environment: dict[str, str], *, demo: bool) -> str:
    """Bring database and static files up to date; return what people should be told once the server is up."""
    command = [sys.executable, str(ROOT / "scripts" / "prepare.py"), *(["--demo"] if demo else [])]
    done = subprocess.run(
        command, env=environment, cwd=ROOT, stdin=subprocess.DEVNULL, stdout=subprocess.PIPE, text=True
    )
    if done.returncode:
        raise CannotStart("Halfnut was not started.")
    return done.stdout.rstrip()


def commands() -> dict[str, list[str]]:
    """The two processes; relative to the project's folder, where `make` starts this."""
    return {
        "web server": [sys.executable, "-m", "gunicorn", "-c", "config/gunicorn.py", "--no-control-socket"],
        "background worker": [sys.executable, "manage.py", "work"],
    }


def answers(host: str, port: int) -> bool:
    """Whether the web server gives any answer at all."""
    connection = http.client.HTTPConnection("127.0.0.1" if host == "0.0.0.0" else host.strip("[]"), port, timeout=10)
    try:
        connection.request("GET", "/health")
        connection.getresponse()
    except (OSError, http.client.HTTPException):
        return False
    finally:
        connection.close()
    return True


def welcome(host: str, port: int, notes: str, *, demo: bool) -> str:
    lines = ["", f"Halfnut is up at http://{host}:{port}/", ""]
    if notes:
        lines += [notes, ""]
    kept = "What is entered is kept; `make run` finds it again. " if demo else ""
    return "\n".join([*lines, f"{kept}Stop with Ctrl-C."])


if __name__ == "__main__":
    os.chdir(ROOT)
    sys.exit(main())
