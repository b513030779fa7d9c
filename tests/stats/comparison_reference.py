"""Published data and values for comparisons of groups and repeated failures, read from tests/reference."""

from __future__ import annotations

import json
from functools import cache
from typing import Any

from reliability.stats.lifetimes import Lifetimes
from reliability.stats.recurrence import Histories
from tests.stats.reference import FOLDER, column, rows


@cache
def check(identifier: str) -> dict[str, Any]:
    """One entry of comparison_checks.json."""
    with (FOLDER / "comparison_checks.json").open(encoding="utf-8") as file:
        return next(entry for entry in json.load(file)["entries"] if entry["id"] == identifier)


def grouped(name: str, age: str, failed: str, group: str) -> Lifetimes:
    lines = rows(name)
    return Lifetimes(column(lines, age), column(lines, failed), groups=[line[group] for line in lines])


def leukaemia_6mp() -> Lifetimes:
    return grouped("freireich_6mp_two_group", "t", "e", "g")


def kidney_dialysis() -> Lifetimes:
    return grouped("km_kidney_dialysis", "time", "delta", "type")


def valve_seats() -> Histories:
    lines = rows("valve_seat")
    engines = sorted({line["id"] for line in lines})
    of = {engine: [line for line in lines if line["id"] == engine] for engine in engines}
    events = [[float(line["time"]) for line in of[engine] if line["status"] == "1"] for engine in engines]
    ends = [next(float(line["time"]) for line in of[engine] if line["status"] == "0") for engine in engines]
    return Histories(engines, events, 0, ends)


def nist_repairs() -> list[float]:
    return [float(line["hours"]) for line in rows("nist_repair_times_T1500")]


def crow_systems() -> list[list[float]]:
    lines = rows("crow1974_three_systems_T200")
    return [[float(line["hours"]) for line in lines if line["system"] == system] for system in ("1", "2", "3")]
