"""Published values for stock and queues, read from tests/reference."""

from __future__ import annotations

import json
from functools import cache
from typing import Any

from tests.stats.reference import FOLDER


@cache
def check(identifier: str) -> dict[str, Any]:
    """One entry of stock_and_bench_checks.json."""
    with (FOLDER / "stock_and_bench_checks.json").open(encoding="utf-8") as file:
        return next(entry for entry in json.load(file)["entries"] if entry["id"] == identifier)
