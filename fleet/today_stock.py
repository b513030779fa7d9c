"""What stores and bench want decided today, from the records alone; what will run out is told from reliability/."""

from __future__ import annotations

import datetime as dt
from typing import Any

from fleet.bench import on_the_way, pool
from fleet.formats import counted, number
from fleet.models import BenchJob, Book, Module, Part, StockBalance, SupplyLine
from fleet.rights import BENCH, STOCK, may
from fleet.stock import sees_all_stock, with_stock

MOST = 12


def parts_short(request: Any) -> list[Any]:
    """Parts below their minimum, the most missing first, with what is due of each."""
    if not sees_all_stock(request.user):
        return []
    parts = with_stock(request.seen(Part), request.seen(StockBalance), request.seen(SupplyLine))
    return list(parts.filter(missing__gt=0).order_by("-missing", "code_order")[:MOST])


def lines_overdue(request: Any, today: dt.date) -> int:
    if not may(request.user, STOCK):
        return 0
    return int(request.seen(SupplyLine).open().filter(due_on__lt=today).count())


def bench_now(request: Any) -> dict[str, Any]:
    """How the bench stands against what the book aims at."""
    if not may(request.user, BENCH):
        return {}
    jobs = request.seen(BenchJob).open()
    count, ready, coming = jobs.count(), pool(request.seen(Module)).count(), on_the_way(request.user).count()
    if not (count or ready or coming):
        return {}
    target = Book.load().bench_target
    behind = count > target
    sentence = f"{counted(count, 'module is', 'modules are')} at the bench, {number(ready)} ready in the pool"
    sentence += f", {number(coming)} on the way." if coming else "."
    return {"sentence": sentence, "behind": behind, "target": target}


def stock_today(request: Any, today: dt.date) -> dict[str, Any]:
    return {
        "parts_short": parts_short(request),
        "lines_overdue": lines_overdue(request, today),
        "bench_now": bench_now(request),
    }
