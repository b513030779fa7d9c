"""What the tests need beyond Python: PostgreSQL's server and Chromium, from the system's package manager."""

from __future__ import annotations

import os
import shutil
import subprocess
from pathlib import Path

import throwaway_postgresql

CHROMIUM = Path("/usr/bin/chromium")


def missing_packages() -> list[str]:
    """Debian's names of what is not there."""
    missing = []
    if throwaway_postgresql.find_programs() is None:
        missing.append("postgresql")
    if not CHROMIUM.exists():
        missing.append("chromium")
    return missing


def install_what_is_missing() -> str:
    """Install it where that is allowed; return what a person has to do, or nothing."""
    missing = missing_packages()
    if not missing:
        return ""
    advice = f"The tests need {' and '.join(missing)}. Install: apt-get install {' '.join(missing)}"
    if shutil.which("apt-get") is None:
        return f"{advice}\n(No apt-get here. What is looked for: PostgreSQL's initdb and postgres, and {CHROMIUM}.)"
    as_root = root_prefix()
    if as_root is None:
        return f"{advice}\n(It was not done here: it takes root, or sudo without a password.)"
    print(f"Installing {' and '.join(missing)} for the tests.", flush=True)
    # At run level 1 no package starts a service: the tests start a server of their own.
    quietly = [*as_root, "env", "DEBIAN_FRONTEND=noninteractive", "RUNLEVEL=1", "apt-get", "-q", "-y"]
    for command in ([*quietly, "update"], [*quietly, "install", "--no-install-recommends", *missing]):
        done = subprocess.run(command, stdin=subprocess.DEVNULL, capture_output=True, text=True)
        if done.returncode:
            print(f"{' '.join(command)} failed:\n{done.stderr[-2000:]}", flush=True)
    left = missing_packages()
    return f"{advice}\n(Trying it here failed for {' and '.join(left)}.)" if left else ""


def root_prefix() -> list[str] | None:
    """How to run a command as root from here, if that can be done without asking anybody."""
    if os.geteuid() == 0:
        return []
    if shutil.which("sudo") and subprocess.run(["sudo", "-n", "true"], capture_output=True).returncode == 0:
        return ["sudo", "-n"]
    return None
