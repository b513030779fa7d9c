"""How quick stock stays with a long ledger: on hand, the screens, and an issue, with a million moves.

Run `python -m tests.benchmarks.bench_stock [--moves 1000000]`. The book is a throwaway SQLite file; with
HALFNUT_DATABASE_URL it is that database, which has to be empty.
"""

from __future__ import annotations

import argparse
import datetime as dt
import os
import random
import statistics
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

PARTS, STORES, LINES = 200, 40, 4000
DAYS = 3000
BEGAN = dt.date(2018, 1, 1)
ROUNDS = 9


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])  # type: ignore[union-attr]
    parser.add_argument("--moves", type=int, default=1_000_000)
    options = parser.parse_args()
    with tempfile.TemporaryDirectory() as folder:
        os.environ.update(HALFNUT_DATA=folder, HALFNUT_TESTING="1", DJANGO_SETTINGS_MODULE="config.settings")
        import django

        django.setup()
        from django.core.management import call_command

        call_command("migrate", verbosity=0)
        world = World(options.moves)
        world.measure()


class World:
    """Parts, stores, orders, and a ledger written straight into its table."""

    def __init__(self, moves: int) -> None:
        from tests import factories as make

        component = make.make_component()
        self.parts = [make.make_part(code=f"P-{n:03d}", component=component, minimum=5) for n in range(PARTS)]
        depot = make.make_depot()
        self.stores = [make.make_store(code=f"S-{n:02d}", site=depot if n < 3 else None) for n in range(STORES)]
        self.planner = make.make_planner()
        self.write_orders()
        began = time.perf_counter()
        self.write_moves(moves)
        print(f"{moves:,} moves written in {time.perf_counter() - began:.1f} s")

    def write_orders(self) -> None:
        from fleet.models import SupplyLine, SupplyOrder

        for number in range(LINES // 4):
            order = SupplyOrder.objects.create(code=f"O-{number}", ordered_on=BEGAN + dt.timedelta(days=number))
            for part in random.Random(number).sample(self.parts, 4):
                SupplyLine(order=order, part=part, quantity=500, due_on=BEGAN).save()

    def write_moves(self, count: int) -> None:
        from fleet.models import StockMove, SupplyLine

        dice = random.Random(5)
        lines = {line.part_id: line.pk for line in SupplyLine.objects.order_by("pk")}
        rows: list[StockMove] = []
        for number in range(count):
            store, part = dice.choice(self.stores), dice.choice(self.parts)
            kind = dice.choices(["receipt", "issue", "transfer"], [30, 55, 15])[0]
            other = dice.choice(self.stores) if kind == "transfer" else None
            if other is store:
                other, kind = None, "issue"
            rows.append(StockMove(
                code=f"SM-{number}", code_order=f"SM-{number:012d}", store=store, part=part, kind=kind,
                quantity=3 if kind == "receipt" else -1, other_store=other,
                happened_on=BEGAN + dt.timedelta(days=dice.randrange(DAYS)),
                line_id=lines.get(part.pk) if kind == "receipt" and number % 400 == 0 else None,
            ))  # fmt: skip
            if len(rows) == 5000:
                StockMove.objects.bulk_create(rows)
                rows = []
        StockMove.objects.bulk_create(rows)

    def measure(self) -> None:
        from django.test import Client

        from fleet.actions.issue_part import issue_part
        from fleet.actions.rebuild_balances import ledger_sums, rebuild_balances, wrong_balances

        told("balances made from the ledger", rebuild_balances, rounds=1)
        told("balances held against the ledger", wrong_balances, rounds=3)
        key = next(key for key, count in ledger_sums().items() if count > 50 and key[2] == "new")
        store, part = (next(s for s in self.stores if s.pk == key[0]), next(p for p in self.parts if p.pk == key[1]))
        told("on hand of one part at one store, from the ledger", lambda: on_hand_of(key))
        told("an issue", lambda: issue_part(by=self.planner, store=store, part=part, reason="measured"))
        client = Client()
        client.force_login(self.planner)
        for address in ("/stores/", f"/stores/{store.code}/", "/stores/moves/", f"/stores/moves/?part={part.code}",
                        "/supply/", "/supply/deliveries/"):  # fmt: skip
            told(address, lambda address=address: client.get(address))  # type: ignore[misc]


def on_hand_of(key: tuple[int, int, str]) -> int:
    from django.db.models import Sum

    from fleet.models import StockMove

    standing = StockMove.objects.standing().filter(part=key[1], condition=key[2])
    here = standing.filter(store=key[0]).aggregate(n=Sum("quantity"))["n"] or 0
    return int(here - (standing.filter(other_store=key[0]).aggregate(n=Sum("quantity"))["n"] or 0))


def told(words: str, act: Callable[[], Any], rounds: int = ROUNDS) -> None:
    times = []
    for _ in range(rounds):
        began = time.perf_counter()
        act()
        times.append(1000 * (time.perf_counter() - began))
    print(f"{words:<52}{statistics.median(times):9.1f} ms")


if __name__ == "__main__":
    sys.path.insert(0, str(Path(__file__).resolve().parents[2]))
    main()
