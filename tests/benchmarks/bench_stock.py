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
ROUNDS = 5
ROWS_AT_ONCE = 10_000


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
        """Straight into the table, and the balances from it: objects for a million rows would take minutes."""
        from django.db import connection, transaction

        from fleet.models import SupplyLine

        dice = random.Random(5)
        lines = {line.part_id: line.pk for line in SupplyLine.objects.order_by("pk")}
        stores, parts = [store.pk for store in self.stores], [part.pk for part in self.parts]
        days = [(BEGAN + dt.timedelta(days=day)).isoformat() for day in range(DAYS)]
        names = (
            "code, code_order, version, struck_out, entered_at, store_id, part_id, happened_on, quantity, kind, "
            "other_store_id, line_id, condition, reason"
        )
        with transaction.atomic(), connection.cursor() as cursor:
            for start in range(0, count, ROWS_AT_ONCE):
                rows = []
                for number in range(start, min(count, start + ROWS_AT_ONCE)):
                    store, part, chance = dice.choice(stores), dice.choice(parts), dice.random()
                    other = dice.choice(stores) if chance < 0.15 else None
                    kind = "transfer" if other not in (None, store) else "receipt" if chance < 0.5 else "issue"
                    line = lines.get(part) if kind == "receipt" and number % 400 == 0 else None
                    rows.append((
                        f"SM-{number}", f"SM-{number:012d}", 1, "", "2026-01-01 00:00:00+00:00", store, part,
                        dice.choice(days), 3 if kind == "receipt" else -1, kind,
                        other if kind == "transfer" else None, line, "new", "",
                    ))  # fmt: skip
                cursor.executemany(f"INSERT INTO fleet_stockmove ({names}) VALUES ({', '.join(['%s'] * 14)})", rows)
            ends = (
                "SELECT store_id, part_id, condition, quantity FROM fleet_stockmove UNION ALL SELECT other_store_id, "
                "part_id, condition, -quantity FROM fleet_stockmove WHERE other_store_id IS NOT NULL"
            )
            cursor.execute(
                "INSERT INTO fleet_stockbalance (store_id, part_id, condition, on_hand, changes) SELECT store_id, "
                f"part_id, condition, SUM(quantity), 1 FROM ({ends}) AS ends GROUP BY store_id, part_id, condition"
            )
            if connection.vendor == "postgresql":
                cursor.execute("ANALYZE")

    def measure(self) -> None:
        from django.test import Client

        from fleet.actions.issue_part import issue_part
        from fleet.actions.rebuild_balances import wrong_balances
        from fleet.models import StockBalance

        told("balances held against the ledger", wrong_balances, rounds=1)
        fullest = StockBalance.objects.order_by("-on_hand").values_list("store", "part", "condition")
        key = fullest[0]
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
