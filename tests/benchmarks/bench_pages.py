"""How long the server takes for each page of the demo fleet, beside an empty page in the same run.

`python tests/benchmarks/bench_pages.py [rounds]` loads the demo into a throwaway SQLite book. Budgets: every page under
150 ms at the median, Life and Forecast under 400 ms, logging a visit under 100 ms, on a machine that does nothing else.
"""

from __future__ import annotations

import os
import statistics
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))
PAGES = [
    ("an empty page", "/health", 0),
    ("Today", "/", 150),
    ("Sites", "/sites/", 150),
    ("a site", "/sites/TERN/", 150),
    ("Modules", "/modules/", 150),
    ("a module", "/m/BC-0147", 150),
    ("Bench", "/bench/", 150),
    ("Stores", "/stores/", 150),
    ("a store", "/stores/SHELF-N/", 150),
    ("Log: find", "/log/", 150),
    ("Log: form", "/m/BC-0147/log", 150),
    ("Catalogue", "/catalogue/", 150),
    ("Parts", "/catalogue/parts/", 150),
    ("Records in and out", "/records/", 150),
    ("History", "/history/", 150),
    ("People", "/people/", 150),
    ("Search", "/search/?q=tern", 150),
    ("Life, kept", "/life/?component=NUT", 400),
    ("Forecast, kept", "/forecast/", 400),
]


def open_book(folder: str) -> None:
    os.environ.update(HALFNUT_DATA=folder, HALFNUT_TESTING="1", DJANGO_SETTINGS_MODULE="config.settings")
    os.environ.pop("HALFNUT_DATABASE_URL", None)
    import django

    django.setup()
    from django.core.management import call_command

    call_command("migrate", verbosity=0)
    began = time.perf_counter()
    call_command("demo", stdout=open(os.devnull, "w"))  # noqa: SIM115
    print(f"demo loaded in {time.perf_counter() - began:.1f} s")


def median_ms(act: Callable[[], Any], rounds: int) -> float:
    act()  # what is kept is kept from here on
    times = []
    for _ in range(rounds):
        began = time.perf_counter()
        act()
        times.append(1000 * (time.perf_counter() - began))
    return statistics.median(times)


def measure_pages(rounds: int) -> None:
    from django.test import Client

    from fleet.models import Person

    client = Client()
    client.force_login(Person.objects.get(code="INES"))
    empty = 0.0
    print(f"{'page':<22}{'ms':>8}{'× empty':>9}{'budget':>8}{'kB':>8}")
    for name, address, budget in PAGES:
        spent = median_ms(lambda at=address: client.get(at), rounds)
        size = len(client.get(address).content) / 1000
        empty = empty or spent
        print(f"{name:<22}{spent:>8.1f}{spent / empty:>9.1f}{budget or '':>8}{size:>8.0f}")


def measure_logging(rounds: int) -> None:
    """Usual nut changes, one after the other, on different modules."""
    from django.utils import timezone

    from fleet.actions.entries import PartChange
    from fleet.actions.record_visit import record_visit
    from fleet.models import FailureMode, Fitting, Part, Person

    by = Person.objects.get(code="INES")
    mode = FailureMode.objects.get(component__code="NUT", code="WORN")
    nut = Part.objects.get(code="DN-3")
    running = Fitting.objects.running().filter(position__code="NUT", module__placements__to_on=None)
    fittings = iter(running.select_related("module", "position")[: rounds + 1])

    def log() -> None:
        fitting = next(fittings)
        change = PartChange(position=fitting.position, reason="failed", mode=mode, part=nut)
        record_visit(by=by, module=fitting.module, happened_at=timezone.now(), changes=[change])

    print(f"{'logging a nut change':<22}{median_ms(log, rounds):>8.1f}{'':>9}{100:>8}")


def main(rounds: int) -> None:
    with tempfile.TemporaryDirectory() as folder:
        open_book(folder)
        measure_pages(rounds)
        measure_logging(rounds)


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 15)
