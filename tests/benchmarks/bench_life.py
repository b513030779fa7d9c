"""How long the Life screen takes on the demo fleet when nothing is kept: each component and grouping, then each panel.

`python tests/benchmarks/bench_life.py` loads the demo into a throwaway SQLite book. Budget: the first answer within
half a second on a machine that does nothing else; panels come one by one when they are looked at.
"""

from __future__ import annotations

import statistics
import sys
import tempfile
import time
from pathlib import Path
from typing import Any

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))
BUDGET = 0.5
ROUNDS = 3
GROUPINGS = ("part", "all", "site", "type", "quarter", "lot")


def spent_on(client: Any, address: str, query: dict[str, str]) -> float:
    """Seconds of the quickest of a few tries, nothing kept."""
    from reliability.models import KeptResult

    times = []
    for _ in range(ROUNDS):
        KeptResult.objects.all().delete()
        began = time.perf_counter()
        reply = client.get(address, query)
        times.append(time.perf_counter() - began)
        assert reply.status_code == 200, (address, query, reply.status_code)
    return min(times)


def main() -> None:
    from tests.benchmarks.bench_pages import open_book

    with tempfile.TemporaryDirectory() as folder:
        open_book(folder)
        from django.test import Client

        from fleet.models import Component, Person
        from reliability.life_panels import PANELS

        client = Client()
        client.force_login(Person.objects.get(code="INES"))
        codes = list(Component.objects.values_list("code", flat=True))
        client.get("/life/")  # reads the numerical libraries
        first: list[float] = []
        print(f"{'first answer, s':<16}" + "".join(f"{by:>9}" for by in GROUPINGS))
        for code in codes:
            row = [spent_on(client, "/life/", {"component": code, "by": by}) for by in GROUPINGS]
            first += row
            print(f"{code:<16}" + "".join(f"{value:>9.2f}" for value in row), flush=True)
        over = sum(value > BUDGET for value in first)
        median, worst = statistics.median(first), max(first)
        print(f"median {median:.2f} s, worst {worst:.2f} s, {over} of {len(first)} over {BUDGET} s\n")
        print(f"{'panels, s':<16}" + "".join(f"{panel.name:>11}" for panel in PANELS))
        for code in codes:
            row = [spent_on(client, f"/life/{panel.name}/", {"component": code}) for panel in PANELS]
            print(f"{code:<16}" + "".join(f"{value:>11.2f}" for value in row), flush=True)


if __name__ == "__main__":
    main()
