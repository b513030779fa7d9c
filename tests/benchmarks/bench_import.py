"""How long an import of 100,000 fittings takes, and how long somebody who logs visits meanwhile has to wait.

Run `python -m tests.benchmarks.bench_import [--fittings 100000] [--modules 1000]`. The book is a throwaway SQLite file;
with HALFNUT_DATABASE_URL it is that database, which has to be empty. Both times depend on what else the machine does:
the processor time of the import is printed beside them.
"""

from __future__ import annotations

import argparse
import csv
import datetime as dt
import os
import random
import resource
import subprocess
import sys
import tempfile
import threading
import time
from collections.abc import Iterable, Sequence
from pathlib import Path
from typing import Any

POSITIONS = 7
BEGAN = dt.date(2015, 1, 1)
DAYS = 3900
LOG_EVERY = 0.1  # seconds between two visits


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])  # type: ignore[union-attr]
    parser.add_argument("--fittings", type=int, default=100_000)
    parser.add_argument("--modules", type=int, default=1000)
    parser.add_argument("--log", action="store_true", help=argparse.SUPPRESS)
    options = parser.parse_args()
    if options.log:
        set_up()
        log_until_told()
        return
    with tempfile.TemporaryDirectory(prefix="halfnut-bench-") as folder:
        os.environ["HALFNUT_DATA"] = folder
        measure(Path(folder) / "files", options.fittings, options.modules)


def set_up() -> None:
    os.environ["DJANGO_SETTINGS_MODULE"] = "config.settings"
    import django

    django.setup()


def measure(folder: Path, fittings: int, modules: int) -> None:
    set_up()
    from django.core.management import call_command
    from django.db import connection

    call_command("migrate", verbosity=0, interactive=False)
    write_files(folder, fittings, modules)
    make_logging_world()
    logger = subprocess.Popen(
        [sys.executable, "-m", "tests.benchmarks.bench_import", "--log"],
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        text=True,
    )
    assert logger.stdout is not None
    assert logger.stdout.readline().strip() == "ready"
    before, began = processor_seconds(), time.monotonic()
    call_command("import_records", str(folder))
    took, worked = time.monotonic() - began, processor_seconds() - before
    waits, _ = logger.communicate("stop\n")
    print(f"engine {connection.vendor}, load of the machine {os.getloadavg()[0]:.1f} on {os.cpu_count()} cores")
    print(f"import of {fittings} fittings: {took:.1f} s, of which {worked:.1f} s of processor time")
    print(waits.strip())


def processor_seconds() -> float:
    used = resource.getrusage(resource.RUSAGE_SELF)
    return used.ru_utime + used.ru_stime


def write_files(folder: Path, fittings: int, modules: int) -> None:
    """Modules with long histories of changes; visits are made by the import, one for each module and day."""
    folder.mkdir()
    day = BEGAN.isoformat()
    components = [f"C{place}" for place in range(POSITIONS)]
    write(folder, "sites", "site,kind,zone", ((f"S-{place}", "field", "Europe/Lisbon") for place in range(16)))
    write(folder, "components", "component,clock", ((code, "days") for code in components))
    write(folder, "types", "type", [("BENCHED",)])
    write(folder, "positions", "type,position,component", (("BENCHED", f"P-{code}", code) for code in components))
    write(folder, "parts", "part,component", ((f"{code}-N1", code) for code in components))
    tags = [f"B-{number}" for number in range(modules)]
    write(folder, "modules", "module,type", ((tag, "BENCHED") for tag in tags))
    stays = ((tag, f"S-{place % 16}", day) for place, tag in enumerate(tags))
    write(folder, "placements", "module,site,from_on", stays)
    head = "fitting,module,position,part,fitted_on,removed_on,reason"
    write(folder, "fittings", head, lives(tags, components, fittings))


def lives(tags: Sequence[str], components: Sequence[str], fittings: int) -> Iterable[tuple[Any, ...]]:
    chance = random.Random(7)
    places = [(tag, code) for tag in tags for code in components]
    each, more = divmod(fittings, len(places))
    number = 0
    for place, (tag, code) in enumerate(places):
        count = each + (place < more)
        day = BEGAN
        for life in range(count):
            number += 1
            removed = day + dt.timedelta(days=chance.randint(5, max(6, DAYS // count)))
            last = life == count - 1
            ended = ("", "") if last else (removed.isoformat(), chance.choice(["failed", "planned"]))
            yield (f"F-{number}", tag, f"P-{code}", f"{code}-N1", day.isoformat(), *ended)
            day = removed


def write(folder: Path, name: str, head: str, rows: Iterable[tuple[Any, ...]]) -> None:
    with (folder / f"{name}.csv").open("w", newline="") as target:
        writer = csv.writer(target)
        writer.writerow(head.split(","))
        writer.writerows(rows)


# --- somebody who logs meanwhile


def make_logging_world() -> None:
    from tests.factories import Carriage

    for _ in range(5):
        Carriage()


def log_until_told() -> None:
    from django.utils import timezone

    from fleet.actions.record_visit import record_visit
    from fleet.models import Module, Person

    modules, person = list(Module.objects.all()), Person.objects.filter(role="manager").first()
    told = threading.Event()
    threading.Thread(target=lambda: (sys.stdin.readline(), told.set()), daemon=True).start()
    waits = []
    print("ready", flush=True)
    while not told.is_set():
        began = time.monotonic()
        record_visit(by=person, module=modules[len(waits) % len(modules)], happened_at=timezone.now(), note="seen")
        waits.append(time.monotonic() - began)
        told.wait(LOG_EVERY)
    waits.sort()
    shown = {"median": waits[len(waits) // 2], "95 of 100": waits[int(len(waits) * 0.95)], "longest": waits[-1]}
    print(f"{len(waits)} visits logged meanwhile: " + ", ".join(f"{name} {wait:.2f} s" for name, wait in shown.items()))


if __name__ == "__main__":
    main()
